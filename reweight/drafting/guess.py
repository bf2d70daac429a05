"""A guess, how sure it is, and why."""

from __future__ import annotations

from dataclasses import dataclass
from enum import StrEnum

__all__ = ["Guess", "Sureness", "Value", "certain", "doubtful", "likely"]

Value = str | int | float | bool


class Sureness(StrEnum):
    """How far a guess can be relied on."""

    CERTAIN = "certain"  # the file says so
    LIKELY = "likely"  # filled in, and marked
    DOUBTFUL = "doubtful"  # left open, with the candidates


@dataclass(frozen=True, slots=True, kw_only=True)
class Guess:
    """What a key of the study should hold.

    Attributes
    ----------
    value : str, int, float, bool or None
        None if it is doubtful.
    sureness : Sureness
    why : str
        What it rests on, in words for people.
    candidates : tuple
        Values to choose from, the best first, if it is doubtful.
    """

    value: Value | None
    sureness: Sureness
    why: str
    candidates: tuple[Value, ...] = ()

    @property
    def open(self) -> bool:
        """Whether somebody has to answer it."""
        return self.sureness is Sureness.DOUBTFUL


def certain(value: Value, why: str) -> Guess:
    """Make a guess that the files state."""
    return Guess(value=value, sureness=Sureness.CERTAIN, why=why)


def likely(value: Value, why: str) -> Guess:
    """Make a guess that is filled in and marked."""
    return Guess(value=value, sureness=Sureness.LIKELY, why=why)


def doubtful(candidates: tuple[Value, ...], why: str) -> Guess:
    """Make a guess that is left open."""
    return Guess(value=None, sureness=Sureness.DOUBTFUL, why=why, candidates=candidates)
