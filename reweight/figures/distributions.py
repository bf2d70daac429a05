"""Energy distributions at any temperature beside the runs' own histograms, and the density of states."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from reweight.figures.style import BAND, LINE, SINGLE_COLUMN, axis_text, styled

if TYPE_CHECKING:
    import xarray as xr
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["distribution_figure", "draw_distribution", "draw_states", "states_figure"]

RUN = "#b8b8b8"
LINES = (LINE, "#c4501b", "#4a7c59", "#7a5195", "#8a6d1d")
DASHES = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)))  # told apart in grey, too


def draw_distribution(axes: Axes, dataset: xr.Dataset) -> Axes:
    """Draw a dataset from :func:`reweight.distribution`; the runs' own histograms lie behind, in grey."""
    energy = dataset["energy"].to_numpy()
    for place in range(dataset.sizes["run"]):
        label = "runs, as sampled" if place == 0 else None
        axes.step(
            energy,
            dataset["run_histogram"][place].to_numpy(),
            where="mid",
            color=RUN,
            linewidth=0.7,
            label=label,
        )
    unit = dataset["temperature"].attrs["units"]
    unit = "" if unit == "1" else f" {unit}"
    for place, temperature in enumerate(dataset["temperature"].to_numpy()):
        value = dataset["probability"][place].to_numpy()
        if np.isnan(value).all():
            continue
        bounds = dataset["probability_interval"][place].to_numpy()
        colour = LINES[place % len(LINES)]
        axes.fill_between(
            energy, np.maximum(bounds[:, 0], 0), bounds[:, 1], color=colour, alpha=0.3, linewidth=0
        )
        axes.plot(
            energy, value, color=colour, linestyle=DASHES[place % len(DASHES)], label=f"T = {temperature:g}"
        )
    axes.set_ylim(bottom=0)
    axes.set_xlabel(axis_text(dataset["energy"].attrs["long_name"], dataset["energy"].attrs["units"]))
    axes.set_ylabel(
        axis_text(dataset["probability"].attrs["long_name"], dataset["probability"].attrs["units"])
    )
    axes.legend(frameon=False)
    return axes


def draw_states(axes: Axes, dataset: xr.Dataset) -> Axes:
    """Draw a dataset from :func:`reweight.states`; energies seen too rarely to be trusted are left out."""
    seen = dataset["well_visited"].to_numpy()
    energy = dataset["energy"].to_numpy()[seen]
    bounds = dataset["log_density_of_states_interval"].to_numpy()[seen]
    axes.fill_between(energy, bounds[:, 0], bounds[:, 1], color=BAND, linewidth=0)
    marker = "." if dataset.attrs["bins"] == "levels" and energy.size < 200 else ""
    value = dataset["log_density_of_states"].to_numpy()[seen]
    axes.plot(energy, value, color=LINE, marker=marker, markersize=2, linewidth=0.8)
    axes.set_xlabel(axis_text(dataset["energy"].attrs["long_name"], dataset["energy"].attrs["units"]))
    levels = dataset.attrs["bins"] == "levels"
    axes.set_ylabel("ln g(E)" if levels else "ln density of states")
    text = "absolute" if dataset.attrs["absolute"] else f"zero at {dataset.attrs['reference_energy']:.6g}"
    axes.set_title(f"band: {100 * dataset.attrs['level']:g} % interval; {text}", fontsize=7, loc="left")
    return axes


def distribution_figure(dataset: xr.Dataset) -> Figure:
    """Distributions in one panel."""
    from matplotlib.figure import Figure

    with styled():
        figure = Figure(figsize=(SINGLE_COLUMN, 2.5))
        draw_distribution(figure.subplots(), dataset)
    return figure


def states_figure(dataset: xr.Dataset) -> Figure:
    """Density of states in one panel."""
    from matplotlib.figure import Figure

    with styled():
        figure = Figure(figsize=(SINGLE_COLUMN, 2.5))
        draw_states(figure.subplots(), dataset)
    return figure
