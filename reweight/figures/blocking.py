"""Blocking curves of all runs, one small panel each."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from reweight.answers.blocking import blocking
from reweight.density_of_states import DensityOfStates
from reweight.figures.style import LINE, MARK, SINGLE_COLUMN, axis_text, styled

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["blocking_figure", "draw_blocking"]

MOST_IN_A_COLUMN = 4  # runs; more than that are drawn in two columns


def draw_blocking(axes: Axes, dataset: xr.Dataset) -> Axes:
    """Draw a dataset from :func:`reweight.blocking`; the level it should reach is a dashed line."""
    length = dataset["block_length"].to_numpy()
    error = dataset["error_of_mean"].to_numpy()
    axes.axhline(dataset.attrs["standard_error"], color=MARK, linestyle="--", linewidth=0.8)
    axes.errorbar(
        length,
        error,
        yerr=dataset["error_of_mean_standard_error"].to_numpy(),
        color=LINE,
        marker="o",
        markersize=2,
        linewidth=0.8,
        elinewidth=0.6,
    )
    axes.set_xscale("log", base=2)
    top = max(float(error.max()), dataset.attrs["standard_error"])
    axes.set_ylim(0, 1.6 * top if top > 0 else 1)
    axes.set_title(dataset.attrs["run"], fontsize=7, loc="left")
    return axes


def blocking_figure(combined: DensityOfStates, of: str = "energy") -> Figure:
    """Blocking curves of one column, cold to hot."""
    from matplotlib.figure import Figure

    runs = [combined.runs[place] for place in combined.cold_to_hot]
    columns = 1 if len(runs) <= MOST_IN_A_COLUMN else 2
    rows = math.ceil(len(runs) / columns)
    with styled():
        figure = Figure(figsize=(SINGLE_COLUMN * columns, 0.7 + 1.2 * rows))
        panels = figure.subplots(rows, columns, squeeze=False)
        datasets = [blocking(combined, run.name, of=of) for run in runs]
        for axes, dataset in zip(panels.flat, datasets, strict=False):
            draw_blocking(axes, dataset)
        for axes in panels.flat[len(runs) :]:
            axes.set_axis_off()
        figure.supxlabel("samples in a block", fontsize=8)
        first = datasets[0]["error_of_mean"].attrs
        figure.supylabel(axis_text(first["long_name"], first["units"]).replace("\n", " "), fontsize=8)
        figure.suptitle("dashed: standard error by the correlation in time", fontsize=7)
    return figure
