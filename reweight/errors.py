"""Everything this package refuses, as one tree.

::

    ReweightError
        InputError            what was given cannot be used              (also ValueError)
            StudyError        a key of a study file
            DataFileError     a data file: which file, which line
            NotInFileError    a quantity this combined file cannot answer
            NoCrossingError   a value that a quantity does not take
            OutOfReachError   a temperature the sampled energies do not support
            TooShortError     a run with too few samples
        DisconnectedError     runs that share no energies
        ConvergenceError      the equations could not be solved
        CombinedFileError     a combined file that cannot be opened       (also OSError)
        OutputError           an output that cannot be written            (also OSError)

Every message says what was found, where, what was expected and what to do.  All arguments after the message have
defaults, so that an error survives the trip out of a worker process.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import ArrayLike, NDArray

__all__ = [
    "CombinedFileError",
    "ConvergenceError",
    "DataFileError",
    "DisconnectedError",
    "InputError",
    "NoCrossingError",
    "NotInFileError",
    "OutOfReachError",
    "OutputError",
    "ReweightError",
    "StudyError",
    "TooShortError",
]


class ReweightError(Exception):
    """Base of everything this package raises on purpose."""


class InputError(ReweightError, ValueError):
    """What was given cannot be used as it is."""


class StudyError(InputError):
    """A key of a study file is missing, unknown, not built yet or has an unusable value.

    Attributes
    ----------
    key : str
        Path of the first offending key, such as ``run[2].temperature``; empty if the file as a whole is meant.
    """

    def __init__(self, message: str, *, key: str = "") -> None:
        super().__init__(message)
        self.key = key


class DataFileError(InputError):
    """A data file cannot be read without changing a number.

    Attributes
    ----------
    path : str
        The file.
    line : int or None
        First offending line (text) or row (arrays), counted from 1.
    """

    def __init__(self, message: str, *, path: str = "", line: int | None = None) -> None:
        super().__init__(message)
        self.path = path
        self.line = line


class NotInFileError(InputError):
    """A quantity was asked that the recorded columns cannot answer.

    Attributes
    ----------
    available : tuple of str
        Names that can be asked.
    """

    def __init__(self, message: str, *, available: Sequence[str] = ()) -> None:
        super().__init__(message)
        self.available = tuple(available)


class NoCrossingError(InputError):
    """A quantity does not take the value asked for, or not at single temperatures.

    Attributes
    ----------
    taken : tuple of float
        Lowest and highest value it takes where it was looked for, in the unit of the answer.
    """

    def __init__(self, message: str, *, taken: tuple[float, float] = (np.nan, np.nan)) -> None:
        super().__init__(message)
        self.taken = taken


class OutOfReachError(InputError):
    """A temperature at which the sampled energies carry too little information.

    Attributes
    ----------
    outside : numpy.ndarray, shape (M,)
        The rejected temperatures, in the study's temperature unit.
    reach : tuple of float
        Lowest and highest temperature the runs support.
    estimate : object
        What the runs would say there, marked as beyond reach (a dataset); None if nothing could be computed.
    """

    def __init__(
        self,
        message: str,
        *,
        outside: ArrayLike = (),
        reach: tuple[float, float] = (np.nan, np.nan),
        estimate: object = None,
    ) -> None:
        super().__init__(message)
        self.outside: NDArray[np.float64] = np.asarray(outside, dtype=float)
        self.reach = reach
        self.estimate = estimate


class TooShortError(InputError):
    """A run has too few samples for any statement about its error.

    Attributes
    ----------
    run : str
        Its name.
    """

    def __init__(self, message: str, *, run: str = "") -> None:
        super().__init__(message)
        self.run = run


class DisconnectedError(ReweightError):
    """Neighbouring groups of runs share less than one independent sample's worth of energies.

    Attributes
    ----------
    groups : tuple of tuple of str
        Names of the runs that hang together, coldest first.
    bridges : numpy.ndarray, shape (M,)
        Temperatures at which additional runs would join them.
    """

    def __init__(
        self, message: str, *, groups: Sequence[Sequence[str]] = (), bridges: ArrayLike = ()
    ) -> None:
        super().__init__(message)
        self.groups = tuple(tuple(group) for group in groups)
        self.bridges: NDArray[np.float64] = np.asarray(bridges, dtype=float)


class ConvergenceError(ReweightError):
    """The free energies could not be solved for; the data are extreme beyond double precision."""


class CombinedFileError(ReweightError, OSError):
    """A file is not a combined file of this package, is damaged, or was written by a newer version."""


class OutputError(ReweightError, OSError):
    """An output cannot be written where it was asked for."""
