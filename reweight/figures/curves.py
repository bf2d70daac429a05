"""Curves with their confidence bands and the simulated temperatures."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from reweight.answers.peak import Peak
from reweight.density_of_states import DensityOfStates
from reweight.figures.style import BAND, LINE, MARK, SINGLE_COLUMN, axis_text, styled

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["curve_figure", "draw_curve", "draw_peak", "simulated_marks"]


FEW = 12


def draw_curve(axes: Axes, dataset: xr.Dataset, label: str) -> Axes:
    """Draw one quantity of a dataset from :func:`reweight.curve` against temperature."""
    temperature = dataset["temperature"].to_numpy()
    value = dataset[label].to_numpy()
    interval = dataset[f"{label}_interval"].to_numpy()
    if temperature.size < FEW:  # single temperatures: a line between them would claim what was not asked
        reach = np.abs(interval - value[:, None]).T
        axes.errorbar(
            temperature, value, yerr=reach, color=LINE, linestyle="none", marker="o", markersize=3, capsize=2
        )
    else:
        axes.fill_between(temperature, interval[:, 0], interval[:, 1], color=BAND, linewidth=0)
        axes.plot(temperature, value, color=LINE)
    axes.set_ylabel(axis_text(dataset[label].attrs["long_name"], dataset[label].attrs["units"]))
    axes.set_xlabel(axis_text("temperature", dataset["temperature"].attrs["units"]))
    return axes


def simulated_marks(axes: Axes, combined: DensityOfStates) -> Axes:
    """Mark the simulated temperatures on the temperature axis, where they fall inside its limits."""
    low, high = axes.get_xlim()
    inside = [t for t in combined.temperatures if np.isfinite(t) and low <= t <= high]
    axes.plot(
        inside,
        np.full(len(inside), 0.03),
        transform=axes.get_xaxis_transform(),
        linestyle="none",
        marker="^",
        markersize=3.5,
        color=MARK,
    )
    return axes


def draw_peak(axes: Axes, peak: Peak) -> Axes:
    """Draw a peak with the confidence intervals of its position and height."""
    low, high = peak.temperature_interval
    bottom, top = peak.height_interval
    axes.errorbar(
        peak.temperature,
        peak.height,
        xerr=None if peak.at_edge else [[peak.temperature - low], [high - peak.temperature]],
        yerr=[[peak.height - bottom], [top - peak.height]],
        color=MARK,
        marker="o",
        markersize=3,
        linestyle="none",
        elinewidth=1,
        capsize=2,
    )
    return axes


def curve_figure(combined: DensityOfStates, dataset: xr.Dataset, marked: Sequence[Peak] = ()) -> Figure:
    """Every quantity of a dataset from :func:`reweight.curve` in a panel of its own, peaks marked in the last."""
    from matplotlib.figure import Figure

    labels = [str(name) for name in dataset.data_vars if f"{name}_interval" in dataset]
    with styled():
        figure = Figure(figsize=(SINGLE_COLUMN, 0.4 + 1.9 * len(labels)))
        panels = figure.subplots(len(labels), 1, sharex=True, squeeze=False)[:, 0]
        for axes, label in zip(panels, labels, strict=True):
            draw_curve(axes, dataset, label)
            simulated_marks(axes, combined)
            axes.label_outer()
        for peak in marked:
            draw_peak(panels[-1], peak)
        shape = "bars" if dataset.sizes["temperature"] < FEW else "band"
        shape += " and cross" if marked else ""
        text = f"{shape}: {100 * dataset.attrs['level']:g} % interval; triangles: simulated temperatures"
        figure.suptitle(text, fontsize=7)
    return figure
