"""Histogram reweighting: one density of states from canonical runs, every temperature answered with error bars.

>>> import numpy as np, reweight as rw
>>> rng = np.random.default_rng(7)
>>> runs = {"cold": rng.gamma(40.0, 1.0, 4000), "hot": rng.gamma(40.0, 1.2, 4000)}
>>> combined = rw.combine(runs, temperatures=[1.0, 1.2])
>>> answer = rw.answer(combined, 1.1, of="heat_capacity")
>>> bool(abs(answer.heat_capacity - 40.0) < 4 * answer.heat_capacity_standard_error)
True
"""

from importlib import import_module
from typing import TYPE_CHECKING

from reweight.version import VERSION

if TYPE_CHECKING:
    from reweight.answers.blocking import blocking
    from reweight.answers.covariance import covariance
    from reweight.answers.crossing import Crossing, crossings
    from reweight.answers.curve import answer, curve
    from reweight.answers.distribution import distribution
    from reweight.answers.peak import Peak, peaks
    from reweight.answers.reach import Reach, reach
    from reweight.answers.resamples import draw_resamples, resampled
    from reweight.answers.states import states
    from reweight.density_of_states import DensityOfStates
    from reweight.errors import (
        DataFileError,
        DisconnectedError,
        InputError,
        OutOfReachError,
        ReweightError,
        StudyError,
    )
    from reweight.runs import read_runs
    from reweight.saving import open_combined, save
    from reweight.studies import combine
    from reweight.study import load_study

__version__ = VERSION

__all__ = [
    "Crossing",
    "DataFileError",
    "DensityOfStates",
    "DisconnectedError",
    "InputError",
    "OutOfReachError",
    "Peak",
    "Reach",
    "ReweightError",
    "StudyError",
    "__version__",
    "answer",
    "blocking",
    "combine",
    "covariance",
    "crossings",
    "curve",
    "distribution",
    "draw_resamples",
    "load_study",
    "open_combined",
    "peaks",
    "reach",
    "read_runs",
    "resampled",
    "save",
    "states",
]

# Public names are loaded when first used: xarray and SciPy take seconds to import, `reweight --help` must not.
_HOMES = {
    "Crossing": "answers.crossing",
    "DataFileError": "errors",
    "DensityOfStates": "density_of_states",
    "DisconnectedError": "errors",
    "InputError": "errors",
    "OutOfReachError": "errors",
    "Peak": "answers.peak",
    "Reach": "answers.reach",
    "ReweightError": "errors",
    "StudyError": "errors",
    "answer": "answers.curve",
    "blocking": "answers.blocking",
    "combine": "studies",
    "covariance": "answers.covariance",
    "crossings": "answers.crossing",
    "curve": "answers.curve",
    "distribution": "answers.distribution",
    "draw_resamples": "answers.resamples",
    "load_study": "study",
    "open_combined": "saving",
    "peaks": "answers.peak",
    "reach": "answers.reach",
    "read_runs": "runs",
    "resampled": "answers.resamples",
    "save": "saving",
    "states": "answers.states",
}


def __getattr__(name: str) -> object:
    if name not in _HOMES:
        raise AttributeError(f"module 'reweight' has no attribute {name!r}")
    value: object = getattr(import_module(f"reweight.{_HOMES[name]}"), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
