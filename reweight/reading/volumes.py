"""Constant pressure: volumes make enthalpies of energies.

At constant pressure p and temperature T, a configuration with energy E and volume V has the weight exp(-(E + p V) / k_B T)
(D. Frenkel and B. Smit, Understanding Molecular Simulation, 2nd edition, section 5.4; from memory).  With the enthalpy
E + p V in the place of the energy, everything else stays as it is.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from reweight.errors import StudyError
from reweight.reading.ledger import FileLedger
from reweight.reading.source import Table, refusal

__all__ = ["Volumes", "refuse_enthalpy"]

_ENOUGH_ROWS = 10  # so many equal volumes are no coincidence of rounding


class Volumes:
    """Volumes of one run: checked, and added to its energies as pressure times volume.

    Parameters
    ----------
    pressure_energy : float
        Pressure times one unit of volume of the whole system, in the study's energy unit.
    """

    def __init__(self, pressure_energy: float) -> None:
        self._pressure_energy = pressure_energy
        self._lowest = np.inf
        self._highest = -np.inf
        self._rows = 0

    def added(self, rows: NDArray[np.float64], path: Path, ledger: FileLedger) -> NDArray[np.float64]:
        """Enthalpies and observables of the next rows, from energies, observables and volumes as the last column.

        Raises
        ------
        DataFileError
            A volume is not above zero.
        """
        volume = rows[:, -1]
        bad = ~(volume > 0)
        if bad.any():
            place = int(np.argmax(bad))
            raise refusal(
                path,
                f"volumes must be greater than 0; got {volume[place]:g} ({int(bad.sum())} of {bad.size} such rows). "
                "Is columns.volume the right column?",
                line=ledger.rows_read - len(rows) + place + 1,
                unit="row",
            )
        self._lowest = min(self._lowest, float(volume.min()))
        self._highest = max(self._highest, float(volume.max()))
        self._rows += len(rows)
        with np.errstate(over="ignore"):  # refused by name by the caller
            rows[:, 0] += self._pressure_energy * volume
        return rows[:, :-1]

    def refuse_constant(self, path: Path) -> None:
        """Refuse a run whose volume never changed, once its last file has been read.

        Raises
        ------
        DataFileError
            All its volumes are the same.
        """
        if self._rows >= _ENOUGH_ROWS and self._lowest == self._highest:
            raise refusal(
                path,
                f"volumes must fluctuate at constant pressure; got {self._lowest:g} in all {self._rows} rows of the "
                "run. If the volume was held, remove conditions.pressure, columns.volume and columns.volume_unit from "
                "the study: the heat capacity is then the one at constant volume.",
            )


def refuse_enthalpy(table: Table, energy: Sequence[int]) -> None:
    """Refuse columns of energies that hold pressure times volume already, by their names.

    Raises
    ------
    StudyError
        One of them is called an enthalpy.
    """
    named = [table.names[place] for place in energy if "enthalpy" in table.names[place].lower()]
    if named:
        raise StudyError(
            "columns.energy must be the energy without pressure times volume, which conditions.pressure adds; got "
            f"{named[0]!r} ({table.path}). Name the potential (or total) energy instead.",
            key="columns.energy",
        )
