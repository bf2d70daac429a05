"""``reweight combine``: from a study to a combined file, and the first screen."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

import click

from reweight.cli import ledger, options, screen
from reweight.cli.peak import describe_extension, describe_peak
from reweight.cli.runs import one_in, runs_record, runs_table

if TYPE_CHECKING:
    from reweight.checks.finding import Finding
    from reweight.density_of_states import DensityOfStates

__all__ = ["combine", "run_combine"]

FEW_RUNS = 4
SUPPORTED = "these runs support heat capacities"
MOST_CAUTIONS = 3


@click.command(short_help="Combine the runs of a study into one file.")
@click.argument("study", type=options.plain_path)
@click.option(
    "-o", "--output", type=options.plain_path, metavar="FILE", help="[default: the study's name with .nc]"
)
@click.option(
    "--workers", type=click.IntRange(1, 64), default=2, show_default=True, help="Files read at a time."
)
@click.option(
    "--continue",
    "earlier",
    type=options.plain_path,
    metavar="OLD.nc",
    help="Read only what was added to the files since OLD.nc was made; it may be the output, too.",
)
@click.option("--json", "as_json", is_flag=True, help="Print JSON in place of the summary.")
@click.option("--force", is_flag=True, help="Replace the output if it exists.")
@click.option("--quiet", is_flag=True, help="No progress and no messages beside the summary.")
def combine(
    study: Path,
    output: Path | None,
    workers: int,
    earlier: Path | None,
    as_json: bool,
    force: bool,
    quiet: bool,
) -> None:
    """Read the runs that STUDY describes, combine them, and write one file that answers every question.

    Ends with status 3 if the runs cannot be trusted: neighbours that hardly share energies, or runs too short
    against their own correlation.
    """
    unsound = run_combine(
        study, output, workers=workers, earlier=earlier, as_json=as_json, force=force, quiet=quiet
    )
    click.get_current_context().exit(3 if unsound else 0)


def run_combine(
    study: Path,
    output: Path | None,
    *,
    workers: int,
    as_json: bool,
    force: bool,
    quiet: bool,
    earlier: Path | None = None,
) -> bool:
    """Combine, save, print the summary; return whether the runs are unsound."""
    from reweight.checks.all_checks import findings
    from reweight.checks.finding import Verdict, worst
    from reweight.files import refuse_target
    from reweight.saving import save
    from reweight.studies import combine as combine_runs
    from reweight.study import load_study

    described = load_study(study)
    ledger.tell_matches(described, quiet=quiet)
    target = study.with_suffix(".nc") if output is None else output
    inputs = [study, *map(described.data_path, described.files)]
    force = force or (earlier is not None and _same_file(target, earlier))
    refuse_target(target, force=force, inputs=inputs)
    with _progress(len(described.used_runs) or len(described.replicas), quiet=quiet) as progress:
        combined = combine_runs(
            described,
            workers=workers,
            progress=progress,
            continued=earlier,
            tell=lambda text: screen.message(text, quiet=quiet),
        )
    save(combined, target, force=force, inputs=inputs)
    found = findings(combined)
    if as_json:
        record = screen.file_envelope(combined, "combine", file=str(target), runs=runs_record(combined))
        screen.print_json(record)
    else:
        _print(combined, found, target)
    return worst(found) is Verdict.UNSOUND


def _same_file(one: Path, other: Path) -> bool:
    return one.exists() and other.exists() and one.samefile(other)


@contextmanager
def _progress(runs: int, *, quiet: bool) -> Iterator[Callable[[str, int], None] | None]:
    """Show a bar on a terminal, nothing elsewhere."""
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

    console = Console(stderr=True)
    if quiet or not console.is_terminal:
        yield None
        return
    columns = (
        TextColumn("reading runs"),
        BarColumn(),
        MofNCompleteColumn(),
        TextColumn("{task.fields[rows]:,} rows"),
    )
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task("", total=runs, rows=0)
        seen = 0

        def advance(run: str, rows: int) -> None:
            nonlocal seen
            seen += rows
            bar.update(task, advance=0 if rows else 1, rows=seen)

        yield advance


def _print(combined: DensityOfStates, found: list[Finding], target: Path) -> None:
    from reweight.checks.finding import Verdict, worst
    from reweight.notation import printable

    description = combined.description
    title = description.title or "untitled study"
    click.echo(f"{title}: {screen.units_text(description)}")
    concerns = sorted(
        (each for each in found if each.verdict is not Verdict.SOUND), key=lambda each: -each.verdict
    )
    shown = _runs_to_show(combined, concerns)
    if shown:
        screen.print_table(*runs_table(combined, shown), indent=2)
    if len(shown) < len(combined.runs):
        click.echo(_in_short(combined, "the others: " if shown else ""))
    headline = _headline(combined)
    for line in [*_account(combined), *headline]:
        click.echo(line)
    for each in concerns[:MOST_CAUTIONS]:
        click.echo(f"{each.verdict}: {each.summary}; {each.advice}")
    if len(concerns) > MOST_CAUTIONS:
        click.echo(f"and {screen.counted(len(concerns) - MOST_CAUTIONS, 'more finding')}; --json lists all")
    size = target.stat().st_size
    reaches = headline[0].startswith(SUPPORTED)
    following = f"reweight curve {target} --plot curve.png" if reaches else f"reweight runs {target}"
    click.echo(printable(f"{worst(found)}; wrote {target} ({size / 1e6:.2g} MB); next: {following}"))


def _runs_to_show(combined: DensityOfStates, concerns: list[Finding]) -> list[int]:
    """Places of the runs worth a line, cold to hot: all if few, otherwise those a finding is about."""
    order = [int(place) for place in combined.cold_to_hot]
    if len(order) <= FEW_RUNS:
        return order
    named = {name for each in concerns for name in each.offender.split(" - ")}
    return [place for place in order if combined.runs[place].name in named]


def _in_short(combined: DensityOfStates, prefix: str) -> str:
    slowest = max(range(len(combined.runs)), key=lambda place: combined.runs[place].inefficiency.value)
    fewest = min(combined.runs, key=lambda run: run.independent_samples)
    text = (
        f"{prefix}{screen.counted(len(combined.runs), 'run')}; slowest {combined.runs[slowest].name}, "
        f"{one_in(combined, slowest)} independent; "
        f"shortest {fewest.name}, {fewest.independent_samples:,.0f} independent samples"
    )
    if len(combined.sharing):
        place = int(combined.sharing.argmin())
        cold, hot = (combined.runs[combined.cold_to_hot[place + step]].name for step in (0, 1))
        text += f"; weakest link {cold} - {hot}, {screen.amount(combined.sharing[place])} shared"
    return text


def _account(combined: DensityOfStates) -> list[str]:
    lines = [*ledger.account(combined), *ledger.runs_left_out(combined)]
    spacings = {run.tally.nodes.spacing for run in combined.runs} - {None}
    for spacing in spacings:
        assert spacing is not None
        lines.append(
            f"energies were rounded in the files; moved to multiples of {spacing.step:g} from {spacing.offset:g} "
            f"(by at most {spacing.largest_shift:.2g})"
        )
    return lines


def _headline(combined: DensityOfStates) -> list[str]:
    """Lines with the reach and the peak of the heat capacity."""
    from reweight.answers.peak import peaks
    from reweight.answers.support import common_reach
    from reweight.errors import OutOfReachError
    from reweight.notation import within as inside

    within = common_reach(combined)
    unit = combined.description.temperature_label
    if within.empty:
        return [f"these runs support no answers yet: {within.limited_by[0]}"]
    low, high = inside(within.lowest, within.highest)
    span = f"from {low} to {high} {unit}".rstrip()
    lines = [f"{SUPPORTED} {span}{_beyond_for_energies(combined)}"]
    try:
        best = peaks(combined)[0]
    except OutOfReachError as error:
        return [*lines, str(error)]
    return [*lines, *describe_peak(combined, best, 0.95)[:2], *describe_extension(best)]


def _beyond_for_energies(combined: DensityOfStates) -> str:
    from reweight.answers.reach import reach
    from reweight.notation import within

    ends = reach(combined, "energy")
    return "" if ends.empty else ", mean energies from {} to {}".format(*within(ends.lowest, ends.highest))
