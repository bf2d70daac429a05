"""Curves: quantities at many temperatures, as one labelled dataset."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import xarray as xr
from numpy.typing import ArrayLike, NDArray

from reweight.answers.evaluate import Evaluation, evaluate
from reweight.answers.presentation import presentation
from reweight.answers.reach import Reach, judge, reach
from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError, OutOfReachError
from reweight.labels import error_attributes, temperature_attributes, value_attributes
from reweight.notation import significant
from reweight.quantities.quantity import Measure, Quantity
from reweight.uncertainty.intervals import check_level, half_width

__all__ = ["DEFAULT_QUANTITIES", "answer", "common_reach", "curve", "temperature_grid"]

Array = NDArray[np.float64]

DEFAULT_QUANTITIES = ("energy", "heat_capacity")
DEFAULT_POINTS = 101
PER_KELVIN = (Measure.ENERGY_PER_KELVIN, Measure.OBSERVABLE_PER_KELVIN)


def curve(
    combined: DensityOfStates,
    temperature: ArrayLike | None = None,
    *,
    of: str | Sequence[str] = DEFAULT_QUANTITIES,
    lowest: float | None = None,
    highest: float | None = None,
    points: int = DEFAULT_POINTS,
    reference: float | None = None,
    level: float = 0.95,
    per_count: bool = False,
    energy_unit: str | None = None,
    beyond_reach: bool = False,
) -> xr.Dataset:
    """Quantities at temperatures that need not have been simulated.

    Parameters
    ----------
    combined : DensityOfStates
        From :func:`reweight.combine` or :func:`reweight.open_combined`.
    temperature : float or array_like, shape (T,), optional
        In the study's temperature unit; infinite allowed.  By default `points` temperatures from `lowest` to
        `highest`, which default to the ends of the reach.
    of : str or sequence of str
        Names of quantities.
    reference : float, optional
        Temperature from which entropies and free energies are counted; by default that of the coldest run within
        reach.
    level : float
        Of the confidence intervals.
    per_count : bool
        Divide extensive quantities by the study's count.
    energy_unit : str, optional
        Unit of the answers; the study's own by default.
    beyond_reach : bool
        Keep answers that the sampled energies do not support; they stay marked in ``within_reach``.

    Returns
    -------
    xarray.Dataset
        On ``temperature``: for every quantity ``X``, ``X_standard_error``, ``X_interval`` (also on ``bound``),
        ``X_within_reach`` and ``X_variance_share`` (also on ``run``: which run makes how much of the variance);
        besides, ``effective_sample_size`` and ``within_reach`` (of all quantities asked).
        Values out of reach are NaN.  Errors at neighbouring temperatures are strongly correlated: do not fit a
        curve to them as if they were independent.

    Raises
    ------
    InputError
        A temperature, level, count or unit cannot be used.
    NotInFileError
        A quantity cannot be answered from what was recorded.
    OutOfReachError
        None of the temperatures is within reach, or the reference is not.

    Examples
    --------
    >>> import numpy as np, reweight as rw
    >>> rng = np.random.default_rng(1)
    >>> runs = {f"T={t}": rng.gamma(30.0, t, 5000) for t in (1.0, 1.2, 1.4)}
    >>> combined = rw.combine(runs, temperatures=[1.0, 1.2, 1.4])
    >>> answer = rw.curve(combined, [1.1, 1.3])
    >>> bool(np.all(abs(answer.mean_energy - 30 * answer.temperature) < 4 * answer.mean_energy_standard_error))
    True
    """
    check_level(level)
    quantities = combined.quantities([of] if isinstance(of, str) else of)
    if temperature is None:
        given = temperature_grid(
            combined, of=[q.name for q in quantities], lowest=lowest, highest=highest, points=points
        )
    else:
        given = np.atleast_1d(np.asarray(temperature, dtype=float))
    beta = combined.description.inverse_temperature(given)
    expressed = [presentation(combined, q, per_count=per_count, energy_unit=energy_unit) for q in quantities]
    origin = _origin(combined, quantities, reference, beyond_reach=beyond_reach)
    evaluations = evaluate(combined, quantities, beta, reference=origin)
    dataset = xr.Dataset(
        coords={
            "temperature": (
                "temperature",
                given,
                temperature_attributes(combined.description.temperature_unit),
            ),
            "bound": ("bound", np.array(["lower", "upper"])),
            "run": ("run", np.array([run.name for run in combined.runs])),
        }
    )
    for evaluation, shown in zip(evaluations, expressed, strict=True):
        quantity = evaluation.quantity
        keep = np.full(given.shape, True) if beyond_reach else evaluation.within_reach
        value, error, half = (
            np.where(keep, each * shown.factor, np.nan) for each in _numbers(evaluation, level)
        )
        long_name = quantity.long_name
        if quantity.from_reference:
            counted_from = significant(float(combined.description.temperature(origin)))
            long_name += f", counted from {counted_from} {combined.description.temperature_label}".rstrip()
        attributes = value_attributes(
            quantity.label,
            long_name,
            shown.unit,
            per=shown.per,
            per_kelvin_unit=quantity.measure in PER_KELVIN,
        )
        label = quantity.label
        dataset[label] = ("temperature", value, attributes)
        dataset[f"{label}_standard_error"] = ("temperature", error, error_attributes(attributes))
        dataset[f"{label}_interval"] = (
            ("temperature", "bound"),
            np.stack([value - half, value + half], axis=1),
            error_attributes(attributes, level=level),
        )
        dataset[f"{label}_within_reach"] = (
            "temperature",
            evaluation.within_reach,
            {"long_name": f"the sampled energies support the {quantity.long_name}"},
        )
        dataset[f"{label}_variance_share"] = (
            ("run", "temperature"),
            np.where(keep, evaluation.variance.shares, np.nan),
            {"units": "1", "long_name": f"share of each run in the variance of the {quantity.long_name}"},
        )
    dataset["effective_sample_size"] = (
        "temperature",
        evaluations[0].effective_sample_size,
        {"units": "1", "long_name": "effective sample size, in independent samples"},
    )
    within = np.logical_and.reduce([evaluation.within_reach for evaluation in evaluations])
    dataset["within_reach"] = (
        "temperature",
        within,
        {"long_name": "the sampled energies support every quantity asked"},
    )
    dataset.attrs = {"title": combined.description.title, "level": level, "errors": "linear response"}
    if not beyond_reach and not any(evaluation.within_reach.any() for evaluation in evaluations):
        raise _out_of_reach(combined, given, [q.name for q in quantities], dataset)
    return dataset


def answer(
    combined: DensityOfStates,
    temperature: ArrayLike,
    *,
    of: str = "heat_capacity",
    beyond_reach: bool = False,
) -> xr.Dataset:
    """One quantity at given temperatures, every one of which must be within reach.

    Parameters
    ----------
    combined : DensityOfStates
    temperature : float or array_like, shape (T,)
        In the study's temperature unit.
    of : str
        Name of the quantity.
    beyond_reach : bool
        Answer where the sampled energies no longer support it, too; the result says so.

    Returns
    -------
    xarray.Dataset
        As from :func:`curve`; without the dimension ``temperature`` if a single number was passed.

    Raises
    ------
    OutOfReachError
        A temperature is out of reach; the error carries the estimate.
    """
    dataset = curve(combined, temperature, of=of, beyond_reach=True)
    outside = ~dataset["within_reach"].to_numpy()
    shown = dataset if np.ndim(temperature) else dataset.isel(temperature=0)
    if outside.any() and not beyond_reach:
        raise _out_of_reach(
            combined, dataset["temperature"].to_numpy()[outside], [of], shown, np.size(temperature)
        )
    return shown


def _origin(
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
        raise _out_of_reach(
            combined, np.array([reference]), [q.name for q in counted], None, what="the reference"
        )
    return float(beta[np.argmax(inside)])


def _numbers(evaluation: Evaluation, level: float) -> tuple[Array, Array, Array]:
    error = evaluation.variance.standard_error
    return evaluation.value, error, half_width(error, evaluation.variance.degrees_of_freedom, level)


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


def temperature_grid(
    combined: DensityOfStates,
    *,
    of: Sequence[str] = DEFAULT_QUANTITIES,
    lowest: float | None = None,
    highest: float | None = None,
    points: int = DEFAULT_POINTS,
) -> Array:
    """Equally spaced temperatures, by default across the reach of the quantities.

    Raises
    ------
    InputError
        The limits are out of order, or fewer than one point is asked.
    OutOfReachError
        A limit is missing and nothing is in reach.
    """
    if points < 1:
        raise InputError(f"points must be at least 1; got {points}.")
    if lowest is None or highest is None:
        within = common_reach(combined, of)
        if within.empty:
            raise _out_of_reach(combined, combined.temperatures, list(of), None)
        lowest = within.lowest if lowest is None else lowest
        # An infinite end has no equally spaced grid; the hottest simulated temperature closes it.
        finite = combined.temperatures[np.isfinite(combined.temperatures)]
        top = within.highest if np.isfinite(within.highest) else float(finite.max(initial=lowest))
        highest = top if highest is None else highest
    if not lowest <= highest:
        raise InputError(
            f"the lowest temperature must not be above the highest; got {lowest:g} and {highest:g}. "
            "Without one of them, the end of the reach is taken."
        )
    return np.linspace(lowest, highest, points)


def _out_of_reach(
    combined: DensityOfStates,
    outside: Array,
    of: Sequence[str],
    estimate: object,
    asked: int | None = None,
    what: str = "temperature",
) -> OutOfReachError:
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
