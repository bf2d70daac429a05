"""Where several quantities are supported together, what differences are counted from, and refusals outside."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from reweight.answers.reach import Reach, judge, reach
from reweight.density_of_states import DensityOfStates
from reweight.errors import OutOfReachError
from reweight.notation import significant
from reweight.quantities.quantity import Quantity

__all__ = [
    "DEFAULT_QUANTITIES",
    "common_reach",
    "counted_from",
    "extrapolated",
    "origin_beta",
    "out_of_reach",
]

Array = NDArray[np.float64]

DEFAULT_QUANTITIES = ("energy", "heat_capacity")


def origin_beta(
    combined: DensityOfStates, quantities: Sequence[Quantity], reference: float | None, *, beyond_reach: bool
) -> float:
    """Inverse temperature from which entropies and free energies are counted.

    By default that of the coldest run at which they are supported: a difference is only supported if both ends are.
    """
    counted = [quantity for quantity in quantities if quantity.from_reference]
    beta = combined.estimate.beta[combined.cold_to_hot]
    if reference is not None:
        beta = np.atleast_1d(combined.description.inverse_temperature(reference))
    inside = np.full(beta.shape, True)
    for quantity in counted:
        inside &= judge(combined, quantity, beta)[0]
    if reference is not None and not inside.any() and not beyond_reach:
        raise out_of_reach(
            combined, np.array([reference]), [q.name for q in counted], None, what="the reference"
        )
    return float(beta[np.argmax(inside)])


def extrapolated(combined: DensityOfStates, beta: Array) -> NDArray[np.bool_]:
    """Whether inverse temperatures lie at or beyond those of the outermost runs, shape (T,).

    An end that needs no energies beyond the sampled ones is none: infinite temperature, say.
    """
    simulated = combined.estimate.beta
    outside = (beta >= simulated.max()) | ((beta <= simulated.min()) & (beta > 0))
    return np.asarray(outside)


def counted_from(combined: DensityOfStates, quantity: Quantity, origin: float) -> str:
    """Name of a quantity with the temperature it is counted from, if it is."""
    if not quantity.from_reference:
        return quantity.long_name
    temperature = significant(float(combined.description.temperature(origin)))
    return (
        f"{quantity.long_name}, counted from {temperature} {combined.description.temperature_label}".rstrip()
    )


def common_reach(combined: DensityOfStates, of: Sequence[str] = DEFAULT_QUANTITIES) -> Reach:
    """Range over which all the quantities can be answered; NaN ends if there is none."""
    ranges = [reach(combined, name) for name in of]
    coldest = max(ranges, key=lambda r: np.inf if r.empty else r.lowest)
    hottest = min(ranges, key=lambda r: -np.inf if r.empty else r.highest)
    if coldest.empty or hottest.empty or coldest.lowest > hottest.highest:
        return replace(coldest, lowest=np.nan, highest=np.nan)
    return Reach(
        lowest=coldest.lowest,
        highest=hottest.highest,
        limited_by=(coldest.limited_by[0], hottest.limited_by[1]),
    )


def out_of_reach(
    combined: DensityOfStates,
    outside: Array,
    of: Sequence[str],
    estimate: object,
    asked: int | None = None,
    what: str = "temperature",
) -> OutOfReachError:
    """Make the refusal of temperatures at which not all quantities are supported.

    Parameters
    ----------
    outside : numpy.ndarray
        The temperatures in question.
    of : sequence of str
    estimate : object
        What would have been answered.
    asked : int, optional
        How many temperatures were asked in all.
    what : str
        What lies outside.
    """
    within = common_reach(combined, of)
    unit = f" {combined.description.temperature_label}".rstrip()
    names = " and ".join(of)
    if within.empty:
        return OutOfReachError(
            f"the runs must support {names} somewhere; got too few independent samples for any temperature "
            f"({within.limited_by[0]}). Sample longer, or ask beyond the reach to see an unsupported estimate.",
            outside=outside,
            estimate=estimate,
        )
    total = outside.size if asked is None else asked
    return OutOfReachError(
        f"{what} must lie in [{significant(within.lowest)}, {significant(within.highest)}]{unit}, the reach of these "
        f"runs for {names}; got {significant(float(outside[0]))}{unit} ({outside.size} of {total} values are outside). "
        f"At the cold end {within.limited_by[0]}; at the hot end {within.limited_by[1]}. Add a run there, or ask beyond "
        "the reach to see an unsupported estimate.",
        outside=outside,
        reach=(within.lowest, within.highest),
        estimate=estimate,
    )
