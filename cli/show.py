"""``reweight show``: what a combined file is and what it can answer."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from reweight.cli import ledger, options, screen
from reweight.cli.runs import runs_record

if TYPE_CHECKING:
    from reweight.answers.reach import Reach
    from reweight.density_of_states import DensityOfStates

__all__ = ["show"]


@click.command(short_help="What a combined file is, what may be asked of it, and how far it reaches.")
@click.argument("file", type=options.plain_path)
@click.option("--inputs", is_flag=True, help="List the files it was made from, with their hashes.")
@click.option("--json", "as_json", is_flag=True, help="Print JSON in place of the text.")
def show(file: Path, inputs: bool, as_json: bool) -> None:
    """Describe a combined file: runs, temperatures, quantities with their reach, verdict, and choices made by hand."""
    from reweight.answers.reach import reach

    combined = screen.opened(file, quiet=True)
    reaches = {name: reach(combined, name) for name in combined.quantity_names}
    if as_json:
        screen.print_json(_record(combined, reaches, inputs=inputs))
        return
    _print(combined, reaches)
    if inputs:
        click.echo()
        ledger.print_inputs(combined)


def _print(combined: DensityOfStates, reaches: dict[str, Reach]) -> None:
    from reweight.checks.all_checks import findings
    from reweight.checks.finding import Verdict, worst

    description = combined.description
    unit = description.temperature_label
    click.echo(f"{description.title or 'untitled study'}")
    click.echo(f"  {screen.units_text(description)}")
    facts = {
        "count": None if description.count is None else f"{description.count:,}, per {description.per}",
        "length": None if description.length is None else f"{description.length:g}",
        "dimension": description.dimension,
        "states": description.states,
        "ground degeneracy": description.ground_degeneracy,
    }
    for name, value in facts.items():
        if value is not None:
            click.echo(f"  {name}: {value}")
    samples = sum(run.samples for run in combined.runs)
    click.echo(
        f"  {screen.counted(len(combined.runs), 'run')}, {screen.counted(samples, 'sample')} after transients, at"
    )
    temperatures = sorted(float(t) for t in combined.temperatures)
    click.echo(f"  {', '.join(f'{t:g}' for t in temperatures)} {unit}".rstrip())
    for line in ledger.account(combined):
        click.echo(f"  {line}")
    click.echo(
        f"  made by reweight {combined.provenance.get('version', '')}; energies kept as {_kept(combined)}"
    )
    for each in description.observables:
        counted = "" if each.above is None else f", counted above {each.above:.12g}"
        click.echo(f"  observable {each.name}: {each.normalisation}, unit {each.unit}{counted}")
    click.echo("\nwhat may be asked, and between which temperatures:")
    rows = [(name, *_reach_cells(within)) for name, within in reaches.items()]
    screen.print_table(("quantity", "from", "limited by", "to", "limited by"), rows, indent=2, left=(0, 2, 4))
    found = findings(combined)
    click.echo(f"\nverdict: {worst(found)}")
    for each in found:
        if each.verdict is not Verdict.SOUND:
            click.echo(f"  {each.verdict}: {each.summary}; {each.advice}")
    choices = combined.choices()
    click.echo("choices made by hand: " + ("none" if not choices else ""))
    for choice in choices:
        click.echo(f"  {choice}")


def _kept(combined: DensityOfStates) -> str:
    assembly = combined.estimate.assembly
    if assembly.discrete:
        return f"{screen.counted(assembly.keys.size, 'level')}"
    return f"smooth weights on intervals of {assembly.width:g} {combined.description.energy_unit}"


def _reach_cells(within: Reach) -> tuple[str, str, str, str]:
    if within.empty:
        return ("-", within.limited_by[0], "-", within.limited_by[1])
    return (f"{within.lowest:.5g}", within.limited_by[0], f"{within.highest:.5g}", within.limited_by[1])


def _record(combined: DensityOfStates, reaches: dict[str, Reach], *, inputs: bool) -> dict[str, Any]:
    import dataclasses

    runs = runs_record(combined)
    if not inputs:
        for run in runs:
            del run["files"]
    return screen.file_envelope(
        combined,
        "show",
        description=combined.description.as_dict(),
        runs=runs,
        reach={name: dataclasses.asdict(within) for name, within in reaches.items()},
        choices=combined.choices(),
        made_by=combined.provenance,
    )
