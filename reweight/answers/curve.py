"""Curves: quantities at many temperatures, as one labelled dataset."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import xarray as xr
from numpy.typing import ArrayLike, NDArray

from reweight.answers.evaluate import evaluate
from reweight.answers.presentation import presentation
from reweight.answers.resamples import ask_resamples, resample_attributes
from reweight.answers.support import (
    DEFAULT_QUANTITIES,
    common_reach,
    counted_from,
    extrapolated,
    origin_beta,
    out_of_reach,
)
from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError
from reweight.labels import error_attributes, temperature_attributes
from reweight.uncertainty.intervals import check_level, half_width
from reweight.uncertainty.resampling import Resamples

__all__ = ["answer", "curve", "temperature_grid"]

Array = NDArray[np.float64]

DEFAULT_POINTS = 101


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
    resamples: Resamples | None = None,
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
    resamples : Resamples, optional
        From :func:`reweight.draw_resamples`.  Intervals then have the shape of the resamples (and the scale of the
        linear-response error), and biases are known.

    Returns
    -------
    xarray.Dataset
        On ``temperature``: for every quantity ``X``, ``X_standard_error``, ``X_interval`` (also on ``bound``),
        ``X_degrees_of_freedom``, ``X_within_reach`` and ``X_variance_share`` (also on ``run``: which run makes how
        much of the variance); with resamples, ``X_bias`` and ``X_block_sensitivity`` (also on ``block_length``:
        standard error from blocks half and twice as long, over that from the blocks used); besides,
        ``effective_sample_size``, ``extrapolated`` (at or beyond the outermost simulated temperatures, where
        intervals cover 1 to 4 points less than they say) and ``within_reach`` (of all quantities asked).
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
    origin = origin_beta(combined, quantities, reference, beyond_reach=beyond_reach)
    evaluations = evaluate(combined, quantities, beta, reference=origin)
    extra = (
        [None] * len(evaluations)
        if resamples is None
        else ask_resamples(combined, resamples, evaluations, level, reference=origin)
    )
    variables: dict[str, tuple[Any, ...]] = {}
    for evaluation, shown, drawn in zip(evaluations, expressed, extra, strict=True):
        quantity = evaluation.quantity
        keep = np.full(given.shape, True) if beyond_reach else evaluation.within_reach
        error = evaluation.variance.standard_error
        half = half_width(error, evaluation.variance.degrees_of_freedom, level)
        interval = np.stack([evaluation.value - half, evaluation.value + half], axis=1)
        value, error, lower, upper = (
            np.where(keep, each * shown.factor, np.nan)
            for each in (evaluation.value, error, *(interval if drawn is None else drawn.interval).T)
        )
        long_name = counted_from(combined, quantity, origin)
        attributes = shown.attributes(quantity, long_name)
        label = quantity.label
        variables[label] = ("temperature", value, attributes)
        variables[f"{label}_standard_error"] = ("temperature", error, error_attributes(attributes))
        variables[f"{label}_interval"] = (
            ("temperature", "bound"),
            np.stack([lower, upper], axis=1),
            error_attributes(attributes, level=level),
        )
        variables[f"{label}_degrees_of_freedom"] = (
            "temperature",
            np.where(keep, evaluation.variance.degrees_of_freedom, np.nan),
            {"units": "1", "long_name": f"effective degrees of freedom of the error of the {long_name}"},
        )
        variables[f"{label}_within_reach"] = (
            "temperature",
            evaluation.within_reach,
            {"long_name": f"the sampled energies support the {quantity.long_name}"},
        )
        variables[f"{label}_variance_share"] = (
            ("run", "temperature"),
            np.where(keep, evaluation.variance.shares, np.nan),
            {"units": "1", "long_name": f"share of each run in the variance of the {quantity.long_name}"},
        )
        if drawn is not None:
            variables[f"{label}_bias"] = (
                "temperature",
                np.where(keep, drawn.bias * shown.factor, np.nan),
                {
                    **shown.attributes(quantity, long_name, linked=False),
                    "long_name": f"bias of the {attributes['long_name']}, from resampling",
                },
            )
            variables[f"{label}_block_sensitivity"] = (
                ("block_length", "temperature"),
                np.where(keep, drawn.sensitivity, np.nan),
                {
                    "units": "1",
                    "long_name": "standard error from other blocks over that from the blocks used",
                },
            )
    variables["effective_sample_size"] = (
        "temperature",
        evaluations[0].effective_sample_size,
        {"units": "1", "long_name": "effective sample size, in independent samples"},
    )
    variables["extrapolated"] = (
        "temperature",
        extrapolated(combined, beta),
        {"long_name": "at or beyond the outermost simulated temperatures"},
    )
    within = np.logical_and.reduce([evaluation.within_reach for evaluation in evaluations])
    variables["within_reach"] = (
        "temperature",
        within,
        {"long_name": "the sampled energies support every quantity asked"},
    )
    coordinates: dict[str, Any] = {
        "temperature": (
            "temperature",
            given,
            temperature_attributes(combined.description.temperature_unit),
        ),
        "bound": ["lower", "upper"],
        "run": [run.name for run in combined.runs],
    }
    if resamples is not None:
        coordinates["block_length"] = ["half", "twice"]
    dataset = xr.Dataset(variables, coords=coordinates)
    dataset.attrs = {
        "title": combined.description.title,
        "level": level,
        **({"errors": "linear response"} if resamples is None else resample_attributes(resamples)),
    }
    if not beyond_reach and not any(evaluation.within_reach.any() for evaluation in evaluations):
        raise out_of_reach(combined, given, [q.name for q in quantities], dataset)
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
        raise out_of_reach(
            combined, dataset["temperature"].to_numpy()[outside], [of], shown, np.size(temperature)
        )
    return shown


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
            raise out_of_reach(combined, combined.temperatures, list(of), None)
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
