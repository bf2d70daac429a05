"""Resamples of a combined file, and every question asked of them.

Shape letters: R resamples, K runs, T temperatures.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np
import xarray as xr
from numpy.typing import ArrayLike, NDArray

from reweight.answers.evaluate import Evaluation, moments_at, reference_beta
from reweight.answers.presentation import presentation
from reweight.answers.support import DEFAULT_QUANTITIES, counted_from, origin_beta
from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError
from reweight.files import interrupts_wait, replacing
from reweight.labels import temperature_attributes
from reweight.quantities.quantity import Quantity
from reweight.uncertainty.intervals import rescaled_interval
from reweight.uncertainty.resampling import Resamples, block_sensitivity, resample, resampled_values

__all__ = [
    "NOTABLE_BIAS",
    "Resampled",
    "ask_resamples",
    "draw_resamples",
    "resample_attributes",
    "resampled",
    "resampled_on",
    "save_resampled",
]

Array = NDArray[np.float64]

COUNT = 1000
NUMBERS_AT_ONCE = 2**22  # nodes times temperatures; all resamples are gone through again for the next ones
NOTABLE_BIAS = 0.25  # standard errors from which a bias is reported


def draw_resamples(
    combined: DensityOfStates,
    count: int = COUNT,
    *,
    seed: int = 0,
    progress: Callable[[int], None] | None = None,
) -> Resamples:
    """Draw resamples of the runs in blocks and solve each; one set serves all questions.

    Parameters
    ----------
    combined : DensityOfStates
    count : int
        Resamples to draw.
    seed : int
        The same seed gives the same resamples.
    progress : callable, optional
        Called with the number of resamples just solved.

    Returns
    -------
    Resamples
        To be passed to :func:`reweight.curve`, :func:`reweight.peaks` and :func:`reweight.resampled`.

    Raises
    ------
    InputError
        A run is shorter than 25 statistical inefficiencies: too short for five blocks.

    Examples
    --------
    >>> import numpy as np, reweight as rw
    >>> rng = np.random.default_rng(1)
    >>> runs = {f"T={t}": rng.gamma(30.0, t, 5000) for t in (1.0, 1.2, 1.4)}
    >>> combined = rw.combine(runs, temperatures=[1.0, 1.2, 1.4])
    >>> resamples = rw.draw_resamples(combined, 200, seed=7)
    >>> answer = rw.curve(combined, [1.1], of="energy", resamples=resamples)
    >>> bool(abs(answer.mean_energy_bias[0]) < 0.25 * answer.mean_energy_standard_error[0])
    True
    """
    inefficiencies = np.array(
        [max(run.inefficiency.value, run.decision.weight_inefficiency) for run in combined.runs]
    )
    return resample(
        combined.estimate,
        inefficiencies,
        count,
        seed=seed,
        coupled=combined.description.exchange,
        names=[run.name for run in combined.runs],
        progress=progress,
    )


def resample_attributes(resamples: Resamples) -> dict[str, str | int]:
    """How error bars were made, for a labelled dataset."""
    return {
        "errors": "block bootstrap",
        "seed": resamples.seed,
        "resamples": resamples.count,
        "disconnected_resamples": int(resamples.disconnected.sum()),
    }


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Resampled:
    """What resampling says of one quantity at several temperatures, in the study's units.

    Attributes
    ----------
    values : numpy.ndarray, shape (R, T)
        NaN in resamples without a solution.
    bias : numpy.ndarray, shape (T,)
        Mean of the resamples minus the estimate.
    interval : numpy.ndarray, shape (T, 2)
        The resamples' own shape, rescaled to the linear-response error.
    sensitivity : numpy.ndarray, shape (2, T)
        Standard error from blocks half and twice as long, in units of that from the blocks used, to first order.
    """

    values: Array
    bias: Array
    interval: Array
    sensitivity: Array


def ask_resamples(
    combined: DensityOfStates,
    resamples: Resamples,
    evaluations: Sequence[Evaluation],
    level: float,
    *,
    reference: float | None = None,
) -> list[Resampled]:
    """Every evaluated quantity in every resample, at the same inverse temperatures."""
    quantities = [each.quantity for each in evaluations]
    values = resampled_on(combined, resamples, quantities, evaluations[0].beta, reference=reference)
    answers = []
    for evaluation, drawn in zip(evaluations, values, strict=True):
        spread = evaluation.variance
        answers.append(
            Resampled(
                values=drawn,
                bias=np.nanmean(drawn, axis=0) - evaluation.value,
                interval=rescaled_interval(
                    evaluation.value, drawn, spread.standard_error, spread.degrees_of_freedom, level
                ),
                sensitivity=block_sensitivity(
                    evaluation.blocks, resamples.block_lengths, coupled=combined.description.exchange
                ),
            )
        )
    return answers


def resampled_on(
    combined: DensityOfStates,
    resamples: Resamples,
    quantities: Sequence[Quantity],
    beta: Array,
    *,
    reference: float | None = None,
) -> list[Array]:
    """Every quantity in every resample, shape (R, T); differences from the reference where only these are known."""
    if resamples.estimate is not combined.estimate:
        raise InputError(
            "resamples must have been drawn from the combined runs that are asked; got those of others. "
            "Draw them again with draw_resamples."
        )
    asked = np.append(beta, reference_beta(combined, reference))
    values = resampled_values(resamples, quantities, moments_at(combined, asked, NUMBERS_AT_ONCE))
    return [
        (value - value[:, -1:] if quantity.from_reference else value)[:, :-1]
        for quantity, value in zip(quantities, values, strict=True)
    ]


def resampled(
    combined: DensityOfStates,
    resamples: Resamples,
    temperature: ArrayLike,
    *,
    of: str | Sequence[str] = DEFAULT_QUANTITIES,
    reference: float | None = None,
    per_count: bool = False,
    energy_unit: str | None = None,
    beyond_reach: bool = False,
) -> xr.Dataset:
    """Quantities in every resample, for whoever wants to carry the errors further.

    Parameters
    ----------
    combined : DensityOfStates
    resamples : Resamples
        From :func:`reweight.draw_resamples`.
    temperature : array_like, shape (T,)
        In the study's temperature unit.
    of : str or sequence of str
    reference, per_count, energy_unit
        As in :func:`reweight.curve`.
    beyond_reach : bool
        Accept a reference out of reach.  Which temperatures are within reach is told by :func:`reweight.curve`.

    Returns
    -------
    xarray.Dataset
        On ``resample`` and ``temperature``; ``disconnected`` marks resamples in which runs hardly overlap, whose values
        are NaN if they have no solution.  Differences between two resampled answers keep all their correlations; the
        spread is up to some per cent smaller than the standard errors of :func:`reweight.curve`.

    Raises
    ------
    InputError
        A temperature or unit cannot be used, or the resamples are of other runs.
    """
    quantities = combined.quantities([of] if isinstance(of, str) else of)
    given = np.atleast_1d(np.asarray(temperature, dtype=float))
    beta = combined.description.inverse_temperature(given)
    origin = origin_beta(combined, quantities, reference, beyond_reach=beyond_reach)
    dataset = xr.Dataset(
        {
            "disconnected": (
                "resample",
                resamples.disconnected,
                {"long_name": "runs share less than one independent sample in this resample"},
            )
        },
        coords={
            "resample": ("resample", np.arange(resamples.count)),
            "temperature": (
                "temperature",
                given,
                temperature_attributes(combined.description.temperature_unit),
            ),
        },
        attrs={"title": combined.description.title, **resample_attributes(resamples)},
    )
    drawn = resampled_on(combined, resamples, quantities, beta, reference=origin)
    for quantity, value in zip(quantities, drawn, strict=True):
        shown = presentation(combined, quantity, per_count=per_count, energy_unit=energy_unit)
        dataset[quantity.label] = (
            ("resample", "temperature"),
            value * shown.factor,
            shown.attributes(quantity, counted_from(combined, quantity, origin), linked=False),
        )
    return dataset


def save_resampled(
    dataset: xr.Dataset,
    path: str | os.PathLike[str],
    *,
    force: bool = False,
    inputs: Iterable[str | os.PathLike[str]] = (),
) -> None:
    """Write resampled answers as NetCDF; the file appears complete or not at all.

    Raises
    ------
    OutputError
        The file exists, or cannot be written.
    """
    with replacing(path, force=force, inputs=inputs) as beside, interrupts_wait():
        dataset.to_netcdf(beside, engine="netcdf4")
