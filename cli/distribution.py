"""``reweight distribution``: energy distributions at any temperature."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from reweight.cli import options, screen

if TYPE_CHECKING:
    import xarray as xr

__all__ = ["distribution"]


@click.command(short_help="Energy distribution at any temperature, beside the runs' own.")
@click.argument("file", type=options.plain_path)
@click.option("--of", default="energy", show_default=True, metavar="NAME", help="What to distribute.")
@options.single_temperatures
@options.bin_option
@options.level_option
@click.option("--beyond-reach", is_flag=True, help="Answer where the runs do not support it, too; marked.")
@options.output_options
def distribution(
    file: Path,
    of: str,
    at: tuple[tuple[float, ...], ...],
    bin_width: float | None,
    level: float,
    beyond_reach: bool,
    csv: Path | None,
    plot: Path | None,
    as_json: bool,
    force: bool,
    quiet: bool,
) -> None:
    """Print the probability of energies at the temperatures named by --at ('inf' is one).

    Per level for discrete energies; otherwise a probability density per bin.
    """
    from reweight.answers.distribution import distribution as ask

    combined = screen.opened(file, quiet=quiet, outputs=(csv, plot), force=force)
    temperatures = options.flattened(at)
    if not temperatures:
        raise click.UsageError("--at must name at least one temperature.")
    screen.echo_temperatures(combined, temperatures, quiet=quiet)
    dataset = ask(combined, temperatures, of=of, bin_width=bin_width, level=level, beyond_reach=beyond_reach)
    if csv is not None:
        _write_csv(dataset, csv, force=force, inputs=[file])
    if plot is not None:
        from reweight.figures.distributions import distribution_figure
        from reweight.figures.style import save_figure

        save_figure(distribution_figure(dataset), plot, force=force, inputs=[file])
    if as_json:
        units = {name: dataset[name].attrs["units"] for name in ("temperature", "energy", "probability")}
        names = [
            *dataset.data_vars,
            "temperature",
            "energy",
            "energy_lower",
            "energy_upper",
            "run",
            "run_temperature",
        ]
        content = {str(name): dataset[name].to_numpy() for name in names}
        # JSON has no infinity: an infinite temperature is null, but its inverse is 0.
        content["beta"] = combined.description.inverse_temperature(temperatures)
        screen.print_json(screen.envelope(combined, "distribution", level=level, units=units, **content))
    else:
        _print(dataset)
    screen.tell_written(csv, plot, quiet=quiet)
    screen.tell_outside(
        int((~dataset["within_reach"]).sum()), len(temperatures), beyond=beyond_reach, quiet=quiet
    )


def _write_csv(dataset: xr.Dataset, path: Path, *, force: bool, inputs: list[Path]) -> None:
    energy_unit, unit = dataset["energy"].attrs["units"], dataset["probability"].attrs["units"]
    header = [f"{name} [{energy_unit}]" for name in ("energy", "energy_lower", "energy_upper")]
    columns = [dataset[name].to_numpy() for name in ("energy", "energy_lower", "energy_upper")]
    for place, temperature in enumerate(_temperatures(dataset)):
        interval = dataset["probability_interval"][place].to_numpy()
        header += [f"probability{part} at {temperature} [{unit}]" for part in screen.PARTS]
        columns += [
            dataset["probability"][place].to_numpy(),
            dataset["probability_standard_error"][place].to_numpy(),
            interval[:, 0],
            interval[:, 1],
        ]
    for place, run in enumerate(dataset["run"].to_numpy()):
        header.append(f"run_histogram of {run} [{unit}]")
        columns.append(dataset["run_histogram"][place].to_numpy())
    rows = zip(*(column.tolist() for column in columns), strict=True)
    screen.write_csv(path, header, rows, force=force, inputs=inputs)


def _temperatures(dataset: xr.Dataset) -> list[str]:
    unit = dataset["temperature"].attrs["units"]
    return [f"{each:g}" + ("" if unit == "1" else f" {unit}") for each in dataset["temperature"].to_numpy()]


def _print(dataset: xr.Dataset) -> None:
    from reweight.notation import bracket

    kind = "probability" if (dataset["energy_lower"] == dataset["energy_upper"]).all() else "density"
    titles = [screen.titled(f"{kind} at {each}", dataset["probability"]) for each in _temperatures(dataset)]
    value, error = (dataset[name].to_numpy() for name in ("probability", "probability_standard_error"))
    rows = [
        (
            f"{energy:.8g}",
            *(
                "-" if v != v else bracket(float(v), float(e))
                for v, e in zip(value[:, x], error[:, x], strict=True)
            ),
        )
        for x, energy in enumerate(dataset["energy"].to_numpy())
    ]
    screen.print_table((screen.titled("energy", dataset["energy"]), *titles), rows)
