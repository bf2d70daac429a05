r"""Energy distributions at any temperature, per level or per bin, beside the runs' own histograms.

``P(X; T) = sum_{q in X} W_q r_q``; the influence of a sample is ``op[r (1_X - P)]``.
"""

from __future__ import annotations

import numpy as np
import xarray as xr
from numpy.typing import ArrayLike, NDArray

from reweight.answers.bins import Bins, bin_blocks, energy_bins
from reweight.answers.evaluate import evaluate
from reweight.density_of_states import DensityOfStates
from reweight.errors import NotInFileError
from reweight.labels import energy_unit_label, error_attributes, temperature_attributes, value_attributes
from reweight.uncertainty.intervals import check_level, half_width
from reweight.uncertainty.window import variance

__all__ = ["distribution"]

Array = NDArray[np.float64]

LABEL = "probability"


def distribution(
    combined: DensityOfStates,
    temperature: ArrayLike,
    *,
    of: str = "energy",
    bin_width: float | None = None,
    level: float = 0.95,
    beyond_reach: bool = False,
) -> xr.Dataset:
    """Probability of energies at temperatures that need not have been simulated.

    Parameters
    ----------
    combined : DensityOfStates
    temperature : float or array_like, shape (T,)
        In the study's unit; infinite allowed.
    of : str
        ``"energy"``.
    bin_width : float, optional
        In the study's energy unit; by default each level by itself, or two of the finest bins kept.
    level : float
        Of the confidence intervals.
    beyond_reach : bool
        Answer where the sampled energies do not support it, too.

    Returns
    -------
    xarray.Dataset
        On ``temperature`` and ``energy``: ``probability`` (of a level; of bins: per energy unit) with
        ``_standard_error`` and ``_interval``; NaN at temperatures out of reach; and on ``run`` and ``energy``
        ``run_histogram``, the runs' own samples after their transients, normalised the same way.

    Raises
    ------
    NotInFileError
        Distributions of this column were not recorded.
    InputError
        A temperature or the width is unusable.
    """
    check_level(level)
    if of != "energy":
        raise NotInFileError(
            f"distributions can be asked of energy; got {of!r}. Those of observables need bins, which this version "
            "cannot use yet.",
            available=("energy",),
        )
    given = np.atleast_1d(np.asarray(temperature, dtype=float))
    beta = combined.description.inverse_temperature(given)
    bins = energy_bins(combined, bin_width)
    (supported,) = evaluate(combined, combined.quantities(["energy"]), beta)
    value, error, half = (np.empty((beta.size, bins.count)) for _ in range(3))
    for place, each in enumerate(beta):
        value[place], error[place], half[place] = _at(combined, bins, float(each), level)
    outside = ~supported.within_reach
    if not beyond_reach:
        value[outside] = error[outside] = half[outside] = np.nan
    density = 1.0 if bins.width is None else 1 / bins.width
    value, error, half = value * density, error * density, half * density
    histogram = np.array(
        [_own(combined, bins, place) * density for place in combined.cold_to_hot], dtype=float
    )
    unit = energy_unit_label(combined.description.energy_unit)
    value_unit = "1" if bins.width is None or unit == "1" else _inverse(unit)
    name = "probability" if bins.width is None else "probability density"
    energy_name = combined.description.ensemble.energy_name
    attributes = value_attributes(
        LABEL, f"{name} of the {energy_name}", value_unit, per=None, per_kelvin_unit=False
    )
    attributes["ancillary_variables"] = f"{LABEL}_standard_error {LABEL}_interval"
    lower, upper = bins.edges()
    return xr.Dataset(
        {
            LABEL: (("temperature", "energy"), value, attributes),
            f"{LABEL}_standard_error": (("temperature", "energy"), error, error_attributes(attributes)),
            f"{LABEL}_interval": (
                ("temperature", "energy", "bound"),
                np.stack([value - half, value + half], axis=2),
                error_attributes(attributes, level=level),
            ),
            "within_reach": (
                "temperature",
                ~outside,
                {"long_name": "the sampled energies support this temperature"},
            ),
            "run_histogram": (
                ("run", "energy"),
                histogram,
                {"units": value_unit, "long_name": f"{name} of the {energy_name} in the run's own samples"},
            ),
        },
        coords={
            "temperature": (
                "temperature",
                given,
                temperature_attributes(combined.description.temperature_unit),
            ),
            "energy": ("energy", bins.energy, {"units": unit, "long_name": energy_name}),
            "energy_lower": ("energy", lower, {"units": unit, "long_name": "lower end of the bin"}),
            "energy_upper": ("energy", upper, {"units": unit, "long_name": "upper end of the bin"}),
            "run": ("run", np.array([combined.runs[place].name for place in combined.cold_to_hot])),
            "run_temperature": (
                "run",
                combined.temperatures[combined.cold_to_hot],
                temperature_attributes(combined.description.temperature_unit),
            ),
            "bound": ("bound", np.array(["lower", "upper"])),
        },
        attrs={"title": combined.description.title, "level": level, "errors": "linear response"},
    )


def _at(combined: DensityOfStates, bins: Bins, beta: float, level: float) -> tuple[Array, Array, Array]:
    """Probabilities of the bins at one temperature, their standard errors and half widths, shape (X,) each."""
    canonical = combined.estimate.canonical(np.array([beta]))
    weight = canonical.weights[:, 0]
    probability = bins.sums(combined.estimate.weights[0] * weight)

    def direct(numbers: NDArray[np.int64]) -> Array:
        inside = bins.of_node[:, None] == numbers
        return np.asarray(weight[:, None] * (inside - probability[numbers]))

    spread = variance(bin_blocks(combined, bins, direct), coupled=combined.description.exchange)
    return (
        probability,
        spread.standard_error,
        half_width(spread.standard_error, spread.degrees_of_freedom, level),
    )


def _own(combined: DensityOfStates, bins: Bins, place: int) -> Array:
    """Share of a run's own samples in each bin, shape (X,)."""
    run = combined.estimate.runs[place]
    own = np.zeros(combined.estimate.energies.size)
    own[run.index] = run.total[0]
    return np.asarray(bins.sums(own) / run.counts.sum())


def _inverse(unit: str) -> str:
    """UDUNITS spelling of one over a unit."""
    powers = []
    for factor in unit.split(" "):
        name = factor.rstrip("-0123456789")
        powers.append((name, -int(factor[len(name) :] or 1)))
    powers.sort(key=lambda each: -each[1])  # mol kJ-1, not kJ-1 mol
    return " ".join(name if power == 1 else f"{name}{power}" for name, power in powers)
