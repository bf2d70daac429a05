"""``reweight runs``: a table of the runs, before or after they are combined."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from reweight.cli import ledger, options, screen
from reweight.cli.replicas import print_replicas, replicas_record

if TYPE_CHECKING:
    from reweight.density_of_states import DensityOfStates

__all__ = ["one_in", "runs", "runs_record", "runs_table"]


FEW_OBSERVABLES = 2  # more would not fit a screen; JSON has them all


@click.command(short_help="Table of the runs: rows, transient, independent samples, overlap.")
@click.argument("file", type=options.plain_path)
@click.option(
    "--inputs", is_flag=True, help="List the files, too: rows and their fate, first and last energy, hash."
)
@click.option(
    "--plot",
    type=options.plain_path,
    metavar="PICTURE",
    help="Draw blocking curves, one panel a run: .pdf, .png or .svg.",
)
@click.option("--of", default="energy", show_default=True, help="What to draw: energy, or an observable.")
@click.option("--json", "as_json", is_flag=True, help="Print JSON in place of the table.")
@click.option("--force", is_flag=True, help="Replace the picture if it exists.")
@click.option("--quiet", is_flag=True, help="No messages beside the answer.")
def runs(
    file: Path, inputs: bool, plot: Path | None, of: str, as_json: bool, force: bool, quiet: bool
) -> None:
    """Show what each run is worth.

    FILE is a study (its files are read, nothing is written, and runs that share no energies are shown all the same)
    or a combined file.
    """
    combined = _load(file, plot, force=force, quiet=quiet)
    if plot is not None:
        from reweight.figures.blocking import blocking_figure
        from reweight.figures.style import save_figure

        save_figure(blocking_figure(combined, of), plot, force=force, inputs=[file])
        screen.tell_written(plot, quiet=quiet)
    if as_json:
        content = {"runs": runs_record(combined), "replicas": replicas_record(combined)}
        screen.print_json(screen.file_envelope(combined, "runs", **content))
        return
    header, rows = runs_table(combined, [int(place) for place in combined.cold_to_hot], energies=True)
    screen.print_table(header, rows)
    for line in [*ledger.account(combined), *ledger.runs_left_out(combined)]:
        click.echo(line)
    print_replicas(combined)
    if inputs:
        click.echo()
        ledger.print_inputs(combined)


def _load(file: Path, plot: Path | None, *, force: bool, quiet: bool) -> DensityOfStates:
    if file.suffix.lower() != ".toml":
        return screen.opened(file, quiet=quiet, outputs=(plot,), force=force)
    from reweight.files import refuse_target
    from reweight.studies import combine_study
    from reweight.study import load_study

    described = load_study(file)
    ledger.tell_matches(described, quiet=quiet)
    if plot is not None:
        refuse_target(plot, force=force, inputs=[file, *map(described.data_path, described.files)])
    return combine_study(described, connected=False)


def one_in(combined: DensityOfStates, place: int, of: str = "energy") -> str:
    """How many samples are worth one independent one, as people say it; in time, too, if there is a clock."""
    from reweight.notation import bracket

    run = combined.runs[place]
    found = run.time_scales[of].slower
    if found.constant:
        return "constant"
    text = (
        f"one in {bracket(found.value, found.standard_error, digits=1)}" if found.value > 1 else "every one"
    )
    if run.clock is not None:
        time = bracket(found.value * run.clock.step, found.standard_error * run.clock.step, digits=1)
        text += f", {time} {run.clock.text_unit()}".rstrip()
    return text


def runs_table(
    combined: DensityOfStates, places: list[int], *, energies: bool = False
) -> tuple[tuple[str, ...], list[tuple[str, ...]]]:
    """Heading and rows of the table of runs."""
    unit = combined.description.temperature_label
    header: tuple[str, ...] = ("run", "temperature" + (f" [{unit}]" if unit else ""), "rows", "transient")
    header += ("independent", "independent samples")
    few = tuple(each.name for each in combined.description.observables)
    few = few if energies and len(few) <= FEW_OBSERVABLES else ()
    header += few
    if energies:
        header += ("first energy", "last energy")
    header += ("shared with next hotter",)
    order = list(combined.cold_to_hot)
    rows = []
    for place in places:
        run, rank = combined.runs[place], order.index(place)
        cells = (run.name, f"{combined.temperatures[place]:.6g}", f"{run.rows:,}", f"{run.transient_rows:,}")
        cells += (one_in(combined, place), f"{run.independent_samples:,.0f}")
        cells += tuple(one_in(combined, place, name) for name in few)
        if energies:
            cells += _ends(combined, place)
        cells += (screen.amount(combined.sharing[rank]) if rank < len(combined.sharing) else "",)
        rows.append(cells)
    return header, rows


def _ends(combined: DensityOfStates, place: int) -> tuple[str, str]:
    """First and last energy of a run; nothing if its rows stood among those of others."""
    files = combined.runs[place].files
    elsewhere = {
        entry["path"] for run in combined.runs if run is not combined.runs[place] for entry in run.files
    }
    if not files or any(entry["path"] in elsewhere for entry in files):
        return "", ""
    return f"{files[0]['first_energy']:.7g}", f"{files[-1]['last_energy']:.7g}"


def runs_record(combined: DensityOfStates) -> list[dict[str, Any]]:
    """Runs for machines, in the study's order."""
    return [
        {
            "name": run.name,
            "temperature": float(combined.temperatures[place]),
            "beta": run.beta,
            "rows": run.rows,
            "transient": run.transient_rows,
            "samples": run.samples,
            "discard": run.decision.discard,
            "common_start": run.decision.common_start,
            "statistical_inefficiency": run.inefficiency.value,
            "statistical_inefficiency_standard_error": run.inefficiency.standard_error,
            "independent_samples": run.independent_samples,
            "time_step": None if run.clock is None else run.clock.step,
            "time_unit": None if run.clock is None else run.clock.unit,
            "correlation": {
                name: {
                    "by_series": scales.series.value,
                    "by_series_standard_error": scales.series.standard_error,
                    "by_blocks": scales.blocks.value,
                    "by_blocks_standard_error": scales.blocks.standard_error,
                    "integrated_autocorrelation_time_in_samples": scales.slower.value / 2,
                    "integrated_autocorrelation_time_in_samples_standard_error": scales.slower.standard_error
                    / 2,
                }
                for name, scales in run.time_scales.items()
            },
            "files": list(run.files),
        }
        for place, run in enumerate(combined.runs)
    ]
