"""``reweight states``: the density of states itself."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from reweight.cli import options, screen

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["states"]

LABEL = "log_density_of_states"


@click.command(short_help="The density of states, ln g(E), with error bars.")
@click.argument("file", type=options.plain_path)
@options.bin_option
@click.option(
    "--absolute", is_flag=True, help="Fix the constant by the declared states or ground degeneracy."
)
@options.level_option
@options.output_options
def states(
    file: Path,
    bin_width: float | None,
    absolute: bool,
    level: float,
    csv: Path | None,
    plot: Path | None,
    as_json: bool,
    force: bool,
    quiet: bool,
) -> None:
    """Print ln g(E), per level for discrete energies, per bin otherwise.

    Relative by default: zero at a well visited energy, which is named, and errors those of the difference from it.
    Energies with fewer than ten independent visits are marked.
    """
    from reweight.answers.states import states as ask

    combined = screen.opened(file, quiet=quiet, outputs=(csv, plot), force=force)
    dataset = ask(combined, bin_width=bin_width, absolute=absolute, level=level)
    if csv is not None:
        names = [
            "energy",
            "energy_lower",
            "energy_upper",
            LABEL,
            f"{LABEL}_standard_error",
            "independent_samples",
            "well_visited",
        ]
        header = [f"{name} [{dataset[name].attrs.get('units', '1')}]" for name in names]
        rows = zip(*(dataset[name].to_numpy().tolist() for name in names), strict=True)
        screen.write_csv(csv, header, rows, force=force, inputs=[file])
    if plot is not None:
        from reweight.figures.distributions import states_figure
        from reweight.figures.style import save_figure

        save_figure(states_figure(dataset), plot, force=force, inputs=[file])
    screen.tell_written(csv, plot, quiet=quiet)
    if as_json:
        content = {
            str(name): dataset[name].to_numpy()
            for name in [*dataset.data_vars, "energy_lower", "energy_upper"]
        }
        content |= {
            "energy": dataset["energy"].to_numpy(),
            "absolute": absolute,
            "reference_energy": dataset.attrs.get("reference_energy"),
            "bins": dataset.attrs["bins"],
        }
        units = {"energy": dataset["energy"].attrs["units"], LABEL: "1"}
        screen.print_json(screen.envelope(combined, "states", level=level, units=units, **content))
    else:
        _print(dataset)
    rare = int((~dataset["well_visited"]).sum())
    if rare:
        text = f"{rare} of {screen.counted(dataset.sizes['energy'], 'energy')}".replace("energys", "energies")
        screen.message(
            f"{text} have fewer than 10 independent visits (marked !): no error bar holds there", quiet=quiet
        )


def _print(dataset: xr.Dataset) -> None:
    from reweight.notation import bracket

    unit = dataset["energy"].attrs["units"]
    rows: list[tuple[Any, ...]] = []
    for place, energy in enumerate(dataset["energy"].to_numpy()):
        value, error = (float(dataset[name][place]) for name in (LABEL, f"{LABEL}_standard_error"))
        visits = float(dataset["independent_samples"][place])
        mark = "" if bool(dataset["well_visited"][place]) else " !"
        rows.append((f"{energy:.8g}", bracket(value, error) + mark, f"{visits:,.1f}"))
    energy_title = "energy" + ("" if unit == "1" else f" [{unit}]")
    bins = dataset.attrs["bins"]
    title = "ln g" if bins == "levels" else f"ln density of states (bin {bins})"
    if not dataset.attrs["absolute"]:
        title += f", 0 at {dataset.attrs['reference_energy']:.8g}"
    screen.print_table((energy_title, title, "independent samples"), rows)
