"""``reweight curve``: quantities against temperature."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from reweight.cli import options, screen

if TYPE_CHECKING:
    import numpy as np
    import xarray as xr
    from numpy.typing import NDArray

    from reweight.density_of_states import DensityOfStates

__all__ = ["curve"]

RESAMPLED_PARTS = ("_bias", "_block_sensitivity")


@click.command(short_help="Mean energy, heat capacity and more against temperature.")
@click.argument("file", type=options.plain_path)
@click.option(
    "--of", multiple=True, metavar="NAME", help="Quantity; repeatable; 'list' shows what can be asked."
)
@options.at_options
@options.range_options
@click.option(
    "--reference",
    type=float,
    metavar="T",
    help="Where entropies are counted from.  [default: coldest run in reach]",
)
@options.question_options
@click.option(
    "--covariance",
    type=options.plain_path,
    metavar="FILE",
    help="Write the covariance matrix of all answers (CSV): what a fit to them needs.",
)
@click.option(
    "--save-resamples",
    type=options.plain_path,
    metavar="FILE",
    help="Write the answers in every resample (NetCDF); with --errors bootstrap.",
)
@options.output_options
def curve(
    file: Path,
    of: tuple[str, ...],
    at: tuple[tuple[float, ...], ...],
    points: int | None,
    lowest: float | None,
    highest: float | None,
    reference: float | None,
    per_count: bool,
    energy_unit: str | None,
    level: float,
    errors: str,
    resamples: int,
    seed: int,
    beyond_reach: bool,
    covariance: Path | None,
    save_resamples: Path | None,
    csv: Path | None,
    plot: Path | None,
    as_json: bool,
    force: bool,
    quiet: bool,
) -> None:
    """Answer quantities at temperatures that need not have been simulated.

    FILE is a combined file.  Without --at, 101 temperatures across the reach of the runs.  Values are printed with
    the standard error of their last digits in brackets; rows out of reach stay empty.
    """
    from reweight.answers.curve import DEFAULT_POINTS
    from reweight.answers.curve import curve as ask
    from reweight.answers.support import DEFAULT_QUANTITIES

    combined = screen.opened(file, quiet=quiet, outputs=(covariance, save_resamples, csv, plot), force=force)
    if "list" in of:
        listed = {each.name: each.long_name for each in combined.quantities(combined.quantity_names)}
        if as_json:
            screen.print_json(screen.envelope(combined, "quantities", level=None, quantities=listed))
        else:
            screen.print_table(("name", "what"), list(listed.items()), left=(0, 1))
        return
    if at and (points is not None or lowest is not None or highest is not None):
        raise click.UsageError(
            "--at names single temperatures; it does not go with --from, --to or --points."
        )
    if save_resamples is not None and errors != "bootstrap":
        raise click.UsageError("--save-resamples needs --errors bootstrap.")
    temperatures = options.flattened(at) or None
    if temperatures is not None:
        screen.echo_temperatures(combined, temperatures, quiet=quiet)
    drawn = screen.resamples_of(combined, resamples, seed, quiet=quiet) if errors == "bootstrap" else None
    dataset = ask(
        combined,
        temperatures,
        of=of or DEFAULT_QUANTITIES,
        lowest=lowest,
        highest=highest,
        points=DEFAULT_POINTS if points is None else points,
        reference=reference,
        level=level,
        per_count=per_count,
        energy_unit=energy_unit,
        beyond_reach=beyond_reach,
        resamples=drawn,
    )
    shown = {
        "of": of or DEFAULT_QUANTITIES,
        "reference": reference,
        "per_count": per_count,
        "energy_unit": energy_unit,
        "beyond_reach": beyond_reach,
    }
    given = dataset["temperature"].to_numpy()
    if covariance is not None:
        from reweight.answers.covariance import covariance as matrix_of

        matrix = matrix_of(combined, given, **shown)  # type: ignore[arg-type]
        header, rows = _matrix(matrix)
        screen.write_csv(covariance, header, rows, force=force, inputs=[file])
    if save_resamples is not None and drawn is not None:
        from reweight.answers.resamples import resampled, save_resampled

        each = resampled(combined, drawn, given, **shown)  # type: ignore[arg-type]
        save_resampled(each, save_resamples, force=force, inputs=[file])
    if csv is not None:
        header, rows = _numbers(dataset)
        screen.write_csv(csv, header, rows, force=force, inputs=[file])
    if plot is not None:
        from reweight.figures.curves import curve_figure
        from reweight.figures.style import save_figure

        save_figure(curve_figure(combined, dataset), plot, force=force, inputs=[file])
    if as_json:
        how = {"errors": errors, "seed": seed if drawn is not None else None}
        screen.print_json(
            screen.envelope(combined, "curve", level=level, **how, **_content(combined, dataset))  # type: ignore[arg-type]
        )
    else:
        _print(dataset)
    for label in _labels(dataset):
        if "comment" in dataset[label].attrs:
            screen.message(
                f"{dataset[label].attrs['long_name']}: {dataset[label].attrs['comment']}", quiet=quiet
            )
    screen.tell_written(covariance, save_resamples, csv, plot, quiet=quiet)
    _tell_resampling(dataset, quiet=quiet)
    outside = int((~dataset["within_reach"]).sum())
    screen.tell_outside(outside, dataset.sizes["temperature"], beyond=beyond_reach, quiet=quiet)
    if outside:
        _say_why(combined, dataset, of or DEFAULT_QUANTITIES, quiet=quiet)
    outermost = dataset["extrapolated"] & dataset[_labels(dataset)[0]].notnull()
    screen.tell_extrapolated(int(outermost.sum()), quiet=quiet)


def _say_why(combined: DensityOfStates, dataset: xr.Dataset, names: Sequence[str], *, quiet: bool) -> None:
    """Tell how far each quantity that left the reach goes, and what ends it."""
    from reweight.answers.reach import reach
    from reweight.notation import within

    for label, name in zip(_labels(dataset), names, strict=True):
        if bool(dataset[f"{label}_within_reach"].all()):
            continue
        ends = reach(combined, name)
        if ends.empty:
            screen.message(f"  {name}: {ends.limited_by[0]}", quiet=quiet)
            continue
        low, high = within(ends.lowest, ends.highest)
        screen.message(
            f"  {name}: within {low} to {high}; colder: {ends.limited_by[0]}; hotter: {ends.limited_by[1]}",
            quiet=quiet,
        )


def _labels(dataset: xr.Dataset) -> list[str]:
    return [str(name) for name in dataset.data_vars if f"{name}_interval" in dataset]


def _content(combined: DensityOfStates, dataset: xr.Dataset) -> dict[str, Any]:
    labels = _labels(dataset)
    names = ["temperature", *labels]
    content: dict[str, Any] = {"units": {name: dataset[name].attrs["units"] for name in names}}
    content["temperature"] = dataset["temperature"].to_numpy()
    content["beta"] = combined.description.inverse_temperature(content["temperature"])
    for label in labels:
        parts = (
            "",
            "_standard_error",
            "_interval",
            "_degrees_of_freedom",
            "_within_reach",
            "_variance_share",
        )
        for part in (*parts, *RESAMPLED_PARTS):
            if label + part in dataset:
                content[label + part] = dataset[label + part].to_numpy()
    for name in ("effective_sample_size", "extrapolated", "within_reach", "run"):
        content[name] = dataset[name].to_numpy()
    for name in ("resamples", "disconnected_resamples"):
        if name in dataset.attrs:
            content[name] = dataset.attrs[name]
    return content


def _tell_resampling(dataset: xr.Dataset, *, quiet: bool) -> None:
    """Tell how far the errors depend on the block length, and which answers are biased."""
    from reweight.answers.resamples import NOTABLE_BIAS

    if "resamples" not in dataset.attrs:
        return
    screen.message(
        f"intervals from {dataset.attrs['resamples']} resamples (seed {dataset.attrs['seed']}), scaled to the standard "
        "errors; --csv and --json hold them and the biases",
        quiet=quiet,
    )
    for label in _labels(dataset):
        name = dataset[label].attrs["long_name"]
        spans = ", ".join(
            f"{block_length} as long {_span(ratios)}"
            for block_length, ratios in zip(
                ("half", "twice"), dataset[f"{label}_block_sensitivity"].to_numpy(), strict=True
            )
        )
        screen.message(
            f"  {name}: standard error from other blocks over that from the blocks used: {spans}", quiet=quiet
        )
        ratio = abs(dataset[f"{label}_bias"] / dataset[f"{label}_standard_error"])
        noise = 3 / dataset.attrs["resamples"] ** 0.5  # three standard errors of the bias itself
        notable = int((ratio > max(NOTABLE_BIAS, noise)).sum())
        if notable:
            total = int(dataset[label].notnull().sum())
            screen.message(
                f"  {name}: bias above a quarter of the standard error at {notable} of "
                f"{screen.counted(total, 'temperature')}, at most {float(ratio.max()):.2f} of it; "
                "longer runs make it smaller",
                quiet=quiet,
            )


def _span(ratios: NDArray[np.float64]) -> str:
    import numpy as np

    known = ratios[np.isfinite(ratios)]
    if known.size == 0:
        return "unknown (they cannot be cut)"
    low, high = f"{known.min():.2f}", f"{known.max():.2f}"
    return low if low == high else f"{low} to {high}"


def _matrix(matrix: xr.DataArray) -> tuple[list[str], list[list[Any]]]:
    """Covariance matrix as a table: what each row is, then its numbers."""
    header = ["quantity", "temperature", "unit", *map(str, matrix["other"].to_numpy())]
    labels = zip(*(matrix[name].to_numpy() for name in ("quantity", "temperature", "unit")), strict=True)
    rows = [
        [str(quantity), float(temperature), str(unit), *map(float, numbers)]
        for (quantity, temperature, unit), numbers in zip(labels, matrix.to_numpy(), strict=True)
    ]
    return header, rows


def _numbers(dataset: xr.Dataset) -> tuple[list[str], list[list[Any]]]:
    header, columns = (
        [f"temperature [{dataset['temperature'].attrs['units']}]"],
        [dataset["temperature"].to_numpy()],
    )
    for label in _labels(dataset):
        unit = dataset[label].attrs["units"]
        interval = dataset[f"{label}_interval"].to_numpy()
        header += [f"{label}{part} [{unit}]" for part in screen.PARTS]
        columns += [
            dataset[label].to_numpy(),
            dataset[f"{label}_standard_error"].to_numpy(),
            interval[:, 0],
            interval[:, 1],
        ]
        if f"{label}_bias" in dataset:
            header.append(f"{label}_bias [{unit}]")
            columns.append(dataset[f"{label}_bias"].to_numpy())
    header += ["effective_sample_size [1]", "within_reach"]
    columns += [dataset["effective_sample_size"].to_numpy(), dataset["within_reach"].to_numpy()]
    return header, [[each.item() for each in row] for row in zip(*columns, strict=True)]


def _print(dataset: xr.Dataset) -> None:
    from reweight.notation import bracket, quantity_text, rounded

    labels = _labels(dataset)
    titles = [
        quantity_text(f"{dataset[label].attrs['long_name']}", "") + _in(dataset[label].attrs["units"])
        for label in labels
    ]
    resampled = "resamples" in dataset.attrs
    if resampled:
        span = f"{100 * dataset.attrs['level']:g} % interval"
        titles = [part for title in titles for part in (title, span)]
    rows = []
    for place, temperature in enumerate(dataset["temperature"].to_numpy()):
        cells = [f"{temperature:.6g}"]
        for label in labels:
            value = float(dataset[label][place])
            error = float(dataset[f"{label}_standard_error"][place])
            mark = "" if bool(dataset[f"{label}_within_reach"][place]) else " !"
            cells.append("-" if value != value else bracket(value, error) + mark)
            if resampled:
                ends = dataset[f"{label}_interval"][place].to_numpy()
                cells.append(
                    "-" if value != value else " to ".join(rounded(float(end), error) for end in ends)
                )
        cells.append(f"{float(dataset['effective_sample_size'][place]):.0f}")
        rows.append(cells)
    temperature_title = "temperature" + _in(dataset["temperature"].attrs["units"])
    screen.print_table((temperature_title, *titles, "effective samples"), rows)


def _in(unit: str) -> str:
    return "" if unit == "1" else f" [{unit}]"
