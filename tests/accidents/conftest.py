"""The command line in process, in the folder of a sound study."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest
from accidents.corpus import make_study

from reweight.cli.application import main


@dataclass(frozen=True)
class Outcome:
    """What a command did."""

    status: int
    stdout: str
    stderr: str


Reweight = Callable[..., Outcome]


@pytest.fixture
def study(tmp_path: Path) -> Path:
    """A sound study of two runs."""
    return make_study(tmp_path)


@pytest.fixture
def reweight(capsys: pytest.CaptureFixture[str]) -> Reweight:
    """Run a command."""

    def run(*arguments: object) -> Outcome:
        capsys.readouterr()
        with pytest.raises(SystemExit) as ended:
            main([str(each) for each in arguments])
        captured = capsys.readouterr()
        return Outcome(int(ended.value.code or 0), captured.out, captured.err)

    return run
