"""How replicas wandered through the temperatures: acceptance between neighbours, round trips, residence."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["ReplicaRecord", "Walks"]

Array = NDArray[np.float64]
Places = NDArray[np.intp]


@dataclass(frozen=True, kw_only=True)
class ReplicaRecord:
    """What is known of the replicas of an exchange beside their energies; temperatures from cold to hot.

    Attributes
    ----------
    names : tuple of str, length K
        Of the replicas.
    temperatures : tuple of float, length K
        In the study's unit.
    rows : int
        Rows of every replica.
    acceptance : tuple of float, length K - 1
        Mean over the rows of min(1, exp((b - b') (E - E'))) between neighbours: how likely an exchange would be accepted
        (Metropolis criterion), whether or not one was tried.
    exchanged : tuple of float, length K - 1
        Share of the steps from row to row at which the two neighbours had changed places; if one of them had moved on to
        another temperature, that counts half.
    round_trips : tuple of int, length K
        For every replica, how often it came back to the end of the ladder that it had left, by way of the other end.
    residence : tuple of tuples of float, K times K
        For every replica, the share of its rows at every temperature; 1 / K each if all replicas are alike.
    """

    names: tuple[str, ...]
    temperatures: tuple[float, ...]
    rows: int
    acceptance: tuple[float, ...]
    exchanged: tuple[float, ...]
    round_trips: tuple[int, ...]
    residence: tuple[tuple[float, ...], ...]

    @classmethod
    def from_dict(cls, data: dict[str, Any]) -> ReplicaRecord:
        """Make it from the lists of a file."""
        residence = tuple(tuple(each) for each in data["residence"])
        lists = {key: tuple(value) for key, value in data.items() if isinstance(value, list)}
        return cls(**{**data, **lists, "residence": residence})


class Walks:
    """Collects that record, rows after rows.

    Parameters
    ----------
    beta : numpy.ndarray, shape (K,)
        Inverse temperatures, cold to hot.
    """

    def __init__(self, beta: Array) -> None:
        count = beta.size
        self._steps = beta[:-1] - beta[1:]
        self._rows = 0
        self._residence = np.zeros((count, count), dtype=np.int64)
        self._acceptance = np.zeros(count - 1)
        self._moved = np.zeros(count - 1, dtype=np.int64)
        self._last_replicas: Places | None = None
        self._last_end = np.full(count, -1)
        self._ends_reached = np.zeros(count, dtype=np.int64)

    def add(self, places: Places, replicas: Places, energies: Array) -> None:
        """Take the next rows.

        Parameters
        ----------
        places : numpy.ndarray, shape (N, K)
            Place on the ladder of every replica.
        replicas : numpy.ndarray, shape (N, K)
            The same the other way round: which replica is at every temperature.
        energies : numpy.ndarray, shape (N, K)
            At every temperature.
        """
        count = places.shape[1]
        self._rows += len(places)
        flat = places + count * np.arange(count)
        self._residence += np.bincount(flat.ravel(), minlength=count * count).reshape(count, count)
        gain = self._steps * (energies[:, :-1] - energies[:, 1:])
        self._acceptance += np.exp(np.minimum(gain, 0.0)).sum(axis=0)
        seen = replicas if self._last_replicas is None else np.vstack([self._last_replicas, replicas])
        before, after = seen[:-1], seen[1:]
        self._moved += (before[:, :-1] == after[:, 1:]).sum(axis=0)
        self._moved += (before[:, 1:] == after[:, :-1]).sum(axis=0)
        self._last_replicas = replicas[-1]
        for replica in range(count):
            self._follow(replica, places[:, replica], count - 1)

    def _follow(self, replica: int, places: Places, hottest: int) -> None:
        ends = places[(places == 0) | (places == hottest)]
        if not ends.size:
            return
        seen = np.concatenate([[self._last_end[replica]], ends])
        self._ends_reached[replica] += int((seen[1:] != seen[:-1]).sum())
        self._last_end[replica] = ends[-1]

    def record(self, names: tuple[str, ...], temperatures: Array) -> ReplicaRecord:
        """What was collected."""
        steps = max(self._rows - 1, 1)
        return ReplicaRecord(
            names=names,
            temperatures=tuple(temperatures.tolist()),
            rows=self._rows,
            acceptance=tuple((self._acceptance / self._rows).tolist()),
            exchanged=tuple((self._moved / (2 * steps)).tolist()),
            round_trips=tuple((np.maximum(self._ends_reached - 1, 0) // 2).tolist()),
            residence=tuple(tuple(each) for each in (self._residence / self._rows).tolist()),
        )
