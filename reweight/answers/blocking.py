"""Blocking curves: how correlated a run is, to be seen at a glance."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from reweight.density_of_states import DensityOfStates
from reweight.errors import InputError
from reweight.labels import energy_unit_label
from reweight.series.blocking import blocking as blocking_curve
from reweight.units import canonical_unit

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["blocking"]


def blocking(combined: DensityOfStates, run: str, *, of: str = "energy") -> xr.Dataset:
    """Standard error of one run's mean against the length of the blocks it is estimated from.

    Once blocks are longer than the correlation the curve is flat; if it still rises at its end, the run is too short.

    Parameters
    ----------
    combined : DensityOfStates
    run : str
        Name of a run.
    of : str
        ``"energy"``, or the name of an observable.

    Returns
    -------
    xarray.Dataset
        On dimension ``block_length`` (samples): ``error_of_mean`` in the unit of the column, its own standard error
        ``error_of_mean_standard_error``, and ``block_count``.  Attributes: ``mean`` and, from the correlation in time,
        ``statistical_inefficiency`` and the ``standard_error`` that goes with it.

    Raises
    ------
    InputError
        There is no such run or column.

    Notes
    -----
    H. Flyvbjerg and H. G. Petersen, J. Chem. Phys. 91, 461 (1989) (from memory).  The shortest block is a group of the
    series that was kept, one sample for runs of fewer than 2**14 rows.

    Examples
    --------
    >>> import numpy as np, reweight as rw
    >>> rng = np.random.default_rng(3)
    >>> combined = rw.combine({"a": rng.gamma(30.0, 1.0, 4096)}, temperatures=[1.0], discard=0)
    >>> curve = rw.blocking(combined, "a")
    >>> curve.block_length.to_numpy()[:3]
    array([1, 2, 4])
    >>> abs(float(curve.error_of_mean[4]) / (30**0.5 / 64) - 1) < 0.2
    True
    """
    import xarray as xr

    records = {each.name: each for each in combined.runs}
    if run not in records:
        raise InputError(f"run must be one of {', '.join(records)}; got {run!r}.")
    record = records[run]
    means, within = record.series(of)
    found = blocking_curve(means, group=record.thinned.group)
    scales = record.time_scales[of].slower
    unit = (
        energy_unit_label(combined.description.energy_unit)
        if of == "energy"
        else canonical_unit({each.name: each.unit for each in combined.description.observables}[of])
    )
    variance = float(means.var() + within.mean())
    return xr.Dataset(
        {
            "error_of_mean": (
                "block_length",
                found.error_of_mean,
                {
                    "units": unit,
                    "long_name": f"standard error of mean {of}",
                    "ancillary_variables": "error_of_mean_standard_error block_count",
                },
            ),
            "error_of_mean_standard_error": (
                "block_length",
                found.uncertainty,
                {"units": unit, "long_name": f"standard error of the standard error of mean {of}"},
            ),
            "block_count": ("block_length", found.block_count, {"units": "1", "long_name": "blocks"}),
        },
        coords={
            "block_length": (
                "block_length",
                found.block_length,
                {"units": "1", "long_name": "samples in a block"},
            )
        },
        attrs={
            "run": run,
            "of": of,
            "mean": float(means.mean()),
            "statistical_inefficiency": scales.value,
            "standard_error": float(np.sqrt(variance * scales.value / record.samples)),
        },
    )
