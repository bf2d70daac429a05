"""The study file: what was simulated, in which units, and which files hold the runs."""

from reweight.study.loading import load_study, parse_study
from reweight.study.schema import Columns, Format, Observable, Replica, Run, Study, System

__all__ = [
    "Columns",
    "Format",
    "Observable",
    "Replica",
    "Run",
    "Study",
    "System",
    "load_study",
    "parse_study",
]
