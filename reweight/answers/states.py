r"""The density of states itself, per level or per bin.

A bin X holds ``v = sum_{q in X} W_q / D_q`` states, up to the common constant that canonical runs leave open.  The
influence of a sample on ``ln v`` is ``op[1_X / D] / v``.

The constant is fixed only by something sampled.  A declared total number of states needs infinite temperature within
reach: ``sum v`` is then that number.  A declared degeneracy of the ground level needs that level visited often enough.
Forced without it, the constant comes out wrong by as much as the unseen states: for a 16 x 16 lattice whose hottest run
is at T = 3, every ln g by +10.
"""

from __future__ import annotations

import numpy as np
import xarray as xr
from numpy.typing import NDArray

from reweight.answers.bins import FEWEST_VISITS, Bins, bin_blocks, energy_bins
from reweight.answers.evaluate import Evaluation, evaluate
from reweight.answers.reach import MOST_END_MASS
from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError, OutOfReachError
from reweight.labels import energy_unit_label, error_attributes, value_attributes
from reweight.tally.nodes import COUNT
from reweight.uncertainty.influence import Influence, block_sums, with_free_energies
from reweight.uncertainty.intervals import check_level, half_width
from reweight.uncertainty.window import variance

__all__ = ["states"]

Array = NDArray[np.float64]

LABEL = "log_density_of_states"
FEWEST_GROUND_VISITS = 30.0


def states(
    combined: DensityOfStates, *, bin_width: float | None = None, absolute: bool = False, level: float = 0.95
) -> xr.Dataset:
    """Natural logarithm of the density of states, with standard errors.

    Parameters
    ----------
    combined : DensityOfStates
    bin_width : float, optional
        In the study's energy unit; by default each level by itself, or two of the finest bins kept.
    absolute : bool
        Fix the constant by the study's declared number of states or ground degeneracy, if that was sampled.
    level : float
        Of the confidence intervals.

    Returns
    -------
    xarray.Dataset
        On ``energy``: ``log_density_of_states`` (of levels: ln g; of bins: ln of the number of states per energy
        unit), its ``_standard_error`` and ``_interval``, and ``independent_samples``, the visits behind each.  Unless
        absolute, the value is 0 at a well visited energy (attribute ``reference_energy``), and errors are those of
        differences from it.

    Raises
    ------
    OutOfReachError
        Absolute values were asked, and what would fix the constant was not sampled.
    InputError
        Absolute values were asked and the study declares nothing that fixes the constant; or the width is unusable.
    """
    check_level(level)
    estimate = combined.estimate
    bins = energy_bins(combined, bin_width)
    # Relative to the largest 1 / D, which would overflow for a large system.
    scaled = np.exp(-estimate.solution.log_denominator + estimate.solution.log_denominator.min())
    volume = bins.sums(estimate.weights[0] * scaled)
    visits = bins.sums(estimate.independent)
    seen = volume > 0
    value = np.log(np.where(seen, volume, 1.0)) - estimate.solution.log_denominator.min()
    if bins.width is not None:
        value -= np.log(bins.width)

    def direct(numbers: NDArray[np.int64]) -> Array:
        inside = bins.of_node[:, None] == numbers
        return np.asarray(np.where(inside, scaled[:, None] / np.where(seen, volume, np.inf)[numbers], 0.0))

    blocks = bin_blocks(combined, bins, direct)
    if absolute:
        reference = None
        shift, common = _anchor(combined, bins, value, blocks, visits)
    else:
        reference = _reference(bins, visits)
        shift, common = -value[reference], [block[:, reference : reference + 1] for block in blocks]
    blocks = [block - part for block, part in zip(blocks, common, strict=True)]
    spread = variance(blocks, coupled=combined.description.exchange)
    half = half_width(spread.standard_error, spread.degrees_of_freedom, level)
    value = np.where(seen, value + shift, np.nan)
    return _labelled(
        combined, bins, value, np.where(seen, spread.standard_error, np.nan), half, visits, reference, level
    )


def _reference(bins: Bins, visits: Array) -> int:
    """Bin in the middle of the shortest stretch of energies that holds a quarter of the independent samples.

    Not simply the most visited one: where many are visited about equally, the largest number of visits is so by
    chance, every difference from it comes out too low, and intervals of nominal 95 % hold the truth 81 % of the time.
    """
    before = np.concatenate([[0.0], np.cumsum(visits)])
    quarter = before[-1] / 4
    last = np.searchsorted(before, before[:-1] + quarter) - 1
    fits = last < bins.count
    length = np.where(fits, bins.energy[np.where(fits, last, 0)] - bins.energy, np.inf)
    first = int(np.argmin(length))
    return int(np.searchsorted(before, before[first] + quarter / 2)) - 1


def _anchor(
    combined: DensityOfStates, bins: Bins, value: Array, blocks: list[Array], visits: Array
) -> tuple[float, list[Array]]:
    """Shift of ln g that makes it absolute, and the block sums of what it is counted from."""
    description = combined.description
    if description.log_states is not None and (
        description.ground_degeneracy is None or _infinite_temperature(combined).within_reach[0]
    ):
        _refuse_unless_infinite_temperature_is_in_reach(combined)
        canonical = combined.estimate.canonical(np.zeros(1))
        influences = Influence(with_free_energies(combined.estimate, {COUNT: canonical.weights}))
        shift = description.log_states - float(canonical.log_partition[0])
        return shift, block_sums(combined.estimate, influences)
    if description.ground_degeneracy is not None:
        if bins.width is not None:
            raise InputError(
                "a ground degeneracy fixes the density of states of levels only; these answers are per bin. "
                "Leave the bin width out (discrete energies), or declare states and run at beta = 0."
            )
        if visits[0] < FEWEST_GROUND_VISITS:
            raise OutOfReachError(
                f"the ground level must have been visited at least {FEWEST_GROUND_VISITS:.0f} independent times to fix "
                f"the density of states; the lowest level seen, {bins.energy[0]:g}, was visited {visits[0]:.1f} times. "
                "Add a colder run, or ask for relative values."
            )
        shift = float(np.log(description.ground_degeneracy) - value[0])
        return shift, [block[:, :1] for block in blocks]
    raise InputError(
        "absolute values need a number of states or a ground degeneracy; the study declares neither. "
        'Add states = "2^256" or ground_degeneracy = 2 to [system] and combine again, or ask for relative values.'
    )


def _infinite_temperature(combined: DensityOfStates) -> Evaluation:
    (answer,) = evaluate(combined, combined.quantities(["energy"]), np.zeros(1))
    return answer


def _refuse_unless_infinite_temperature_is_in_reach(combined: DensityOfStates) -> None:
    at_infinity = _infinite_temperature(combined)
    if at_infinity.within_reach[0]:
        return
    hottest = float(combined.temperatures.max())
    share = 100 * float(at_infinity.end_mass[:, 0].max())
    raise OutOfReachError(
        f"a declared number of states fixes the density of states only if infinite temperature is within reach; the "
        f"hottest run is at {hottest:g} {combined.description.temperature_label}".rstrip()
        + f", and at infinite temperature {share:.3g} % of the probability the runs know of lies on their last ten "
        f"independent samples (at most {100 * MOST_END_MASS[False]:g} % may); the states beyond were never seen. "
        "Add runs up to beta = 0, or ask for relative values."
    )


def _labelled(
    combined: DensityOfStates,
    bins: Bins,
    value: Array,
    error: Array,
    half: Array,
    visits: Array,
    reference: int | None,
    level: float,
) -> xr.Dataset:
    unit = energy_unit_label(combined.description.energy_unit)
    what = (
        "degeneracy of the level"
        if bins.width is None
        else f"number of states per {unit if unit != '1' else 'unit'}"
    )
    zero = {} if reference is None else {"reference_energy": float(bins.energy[reference])}
    kind = "" if reference is None else f", counted from that at {bins.energy[reference]:.8g}"
    attributes = value_attributes(
        LABEL, f"natural logarithm of the {what}{kind}", "1", per=None, per_kelvin_unit=False
    )
    attributes["ancillary_variables"] = f"{LABEL}_standard_error {LABEL}_interval independent_samples"
    lower, upper = bins.edges()
    return xr.Dataset(
        {
            LABEL: ("energy", value, attributes),
            f"{LABEL}_standard_error": ("energy", error, error_attributes(attributes)),
            f"{LABEL}_interval": (
                ("energy", "bound"),
                np.stack([value - half, value + half], axis=1),
                error_attributes(attributes, level=level),
            ),
            "independent_samples": (
                "energy",
                visits,
                {"units": "1", "long_name": "independent samples at this energy"},
            ),
            "well_visited": (
                "energy",
                visits >= FEWEST_VISITS,
                {"long_name": f"at least {FEWEST_VISITS:.0f} independent samples at this energy"},
            ),
        },
        coords={
            "energy": (
                "energy",
                bins.energy,
                {"units": unit, "long_name": combined.description.ensemble.energy_name},
            ),
            "energy_lower": ("energy", lower, {"units": unit, "long_name": "lower end of the bin"}),
            "energy_upper": ("energy", upper, {"units": unit, "long_name": "upper end of the bin"}),
            "bound": ("bound", np.array(["lower", "upper"])),
        },
        attrs={
            "title": combined.description.title,
            "level": level,
            "errors": "linear response",
            "absolute": int(reference is None),
            **zero,
            "bins": "levels" if bins.width is None else f"width {bins.width:g}",
        },
    )
