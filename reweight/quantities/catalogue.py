"""The one table of what can be asked."""

from __future__ import annotations

import difflib
from collections.abc import Callable, Iterable, Mapping, Sequence

from reweight.errors import NotInFileError
from reweight.quantities.absolute_mean import AbsoluteMean
from reweight.quantities.energy import MeanEnergy
from reweight.quantities.ensemble import CONSTANT_VOLUME, Ensemble
from reweight.quantities.entropy import Entropy
from reweight.quantities.fraction_above import FractionAbove
from reweight.quantities.free_energy import FreeEnergy
from reweight.quantities.heat_capacity import HeatCapacity
from reweight.quantities.observable_mean import ObservableMean
from reweight.quantities.observable_slope import ObservableCovariance, ObservableSlope
from reweight.quantities.quantity import Quantity, Scaling
from reweight.tally.nodes import Column

__all__ = ["available", "named"]

OF_ENERGY: tuple[Callable[[Ensemble], Quantity], ...] = (
    MeanEnergy,
    HeatCapacity,
    lambda ensemble: Entropy(),
    FreeEnergy,
)
OF_OBSERVABLE: tuple[Callable[[str, Scaling, Ensemble], Quantity], ...] = (
    lambda observable, scaling, ensemble: ObservableMean(observable, scaling),
    ObservableSlope,
    ObservableCovariance,
)

SCALINGS = {"total": Scaling.EXTENSIVE, "per site": Scaling.INTENSIVE, "plain": Scaling.INTENSIVE}


def available(
    normalisations: Mapping[str, str], columns: Sequence[Column] = (), ensemble: Ensemble = CONSTANT_VOLUME
) -> dict[str, Quantity]:
    """Quantities by the name they are asked by.

    Parameters
    ----------
    normalisations : mapping
        From the names of the recorded observables to ``"total"``, ``"per site"`` or ``"plain"``.
    columns : sequence of Column
        What was tallied; some quantities exist only where their own column was.
    ensemble : Ensemble
        What was held in the runs.
    """
    quantities = [make(ensemble) for make in OF_ENERGY]
    for observable, normalisation in normalisations.items():
        quantities += [make(observable, SCALINGS[normalisation], ensemble) for make in OF_OBSERVABLE]
        own = [column for column in columns if column.observable == observable]
        quantities += [AbsoluteMean(c, SCALINGS[normalisation]) for c in own if c.absolute]
        quantities += [FractionAbove(column) for column in own if column.above is not None]
    return {quantity.name: quantity for quantity in quantities}


def named(
    names: Iterable[str],
    normalisations: Mapping[str, str],
    columns: Sequence[Column] = (),
    ensemble: Ensemble = CONSTANT_VOLUME,
) -> list[Quantity]:
    """Look quantities up; parameters as of :func:`available`.

    Raises
    ------
    NotInFileError
        A name is not among those that can be asked; the error lists them.
    """
    known = available(normalisations, columns, ensemble)
    unknown = [name for name in names if name not in known]
    if unknown:
        near = difflib.get_close_matches(unknown[0].lower(), known, n=1, cutoff=0.4)
        hint = f" Did you mean {near[0]!r}?" if near else ""
        raise NotInFileError(
            f"a quantity must be one of {', '.join(known)}; got {unknown[0]!r}.{hint}", available=tuple(known)
        )
    return [known[name] for name in names]
