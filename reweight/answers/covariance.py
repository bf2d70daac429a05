"""Joint covariance of several answers: what a fit to a curve must use in place of separate error bars."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import xarray as xr
from numpy.typing import ArrayLike

from reweight.answers.evaluate import evaluate
from reweight.answers.presentation import presentation
from reweight.answers.support import DEFAULT_QUANTITIES, origin_beta
from reweight.density_of_states import DensityOfStates
from reweight.labels import temperature_attributes
from reweight.notation import significant
from reweight.uncertainty.window import correlation

__all__ = ["covariance"]


def covariance(
    combined: DensityOfStates,
    temperature: ArrayLike,
    *,
    of: str | Sequence[str] = DEFAULT_QUANTITIES,
    reference: float | None = None,
    per_count: bool = False,
    energy_unit: str | None = None,
    beyond_reach: bool = False,
) -> xr.DataArray:
    """Covariance matrix of the errors of quantities at several temperatures.

    Parameters
    ----------
    combined : DensityOfStates
    temperature : array_like, shape (T,)
        In the study's temperature unit.
    of : str or sequence of str
        Names of quantities.
    reference, per_count, energy_unit, beyond_reach
        As in :func:`reweight.curve`.

    Returns
    -------
    xarray.DataArray, shape (A, A)
        On ``answer`` and ``other``, one for each quantity and temperature, all temperatures of a quantity together;
        coordinates ``quantity``, ``temperature`` and ``unit`` say what an answer is.  Its diagonal holds the squares of
        the standard errors of :func:`reweight.curve`; correlations come from overlapping sums of leaves, so that the
        matrix has no negative eigenvalues.  Out of reach it is NaN.

    Raises
    ------
    InputError
        A temperature, count or unit cannot be used.
    NotInFileError
        A quantity cannot be answered from what was recorded.
    OutOfReachError
        The reference is not within reach.

    Examples
    --------
    >>> import numpy as np, reweight as rw
    >>> rng = np.random.default_rng(1)
    >>> runs = {f"T={t}": rng.gamma(30.0, t, 5000) for t in (1.0, 1.2, 1.4)}
    >>> combined = rw.combine(runs, temperatures=[1.0, 1.2, 1.4])
    >>> matrix = rw.covariance(combined, [1.1, 1.2], of="energy")
    >>> [str(each) for each in matrix.answer.values], bool(matrix[0, 1] > 0)
    (['mean_energy at 1.1', 'mean_energy at 1.2'], True)
    """
    quantities = combined.quantities([of] if isinstance(of, str) else of)
    given = np.atleast_1d(np.asarray(temperature, dtype=float))
    beta = combined.description.inverse_temperature(given)
    origin = origin_beta(combined, quantities, reference, beyond_reach=beyond_reach)
    evaluations = evaluate(combined, quantities, beta, reference=origin)
    blocks = [
        np.concatenate(parts, axis=1)
        for parts in zip(*(evaluation.blocks for evaluation in evaluations), strict=True)
    ]
    windows = np.concatenate([evaluation.variance.windows for evaluation in evaluations], axis=1)
    shown = [presentation(combined, q, per_count=per_count, energy_unit=energy_unit) for q in quantities]
    error = np.concatenate(
        [
            np.where(each.within_reach | beyond_reach, each.variance.standard_error, np.nan)
            * abs(form.factor)
            for each, form in zip(evaluations, shown, strict=True)
        ]
    )
    matrix = correlation(blocks, windows, coupled=combined.description.exchange) * np.outer(error, error)
    names = [f"{q.label} at {significant(float(t))}" for q in quantities for t in given]
    kinds = np.repeat([q.label for q in quantities], given.size)
    units = np.repeat([form.unit for form in shown], given.size)
    attributes = temperature_attributes(combined.description.temperature_unit)
    return xr.DataArray(
        matrix,
        dims=("answer", "other"),
        coords={
            "answer": names,
            "other": names,
            "quantity": ("answer", kinds),
            "temperature": ("answer", np.tile(given, len(quantities)), attributes),
            "unit": ("answer", units),
        },
        name="covariance",
        attrs={"long_name": "covariance of the errors; units are the products of those of the two answers"},
    )
