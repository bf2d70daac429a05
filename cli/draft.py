"""``reweight draft``: from data files to a first study, with everything doubtful left open."""

from __future__ import annotations

import shlex
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import click

from reweight.cli import options, screen
from reweight.notation import printable

if TYPE_CHECKING:
    from reweight.drafting import Draft, Guess
    from reweight.drafting.runs import DraftRun

__all__ = ["draft"]


@click.command(short_help="Write a first study from data files; what is doubtful is left open.")
@click.argument("files", type=options.plain_path, nargs=-1, required=True)
@click.option(
    "-o",
    "--output",
    type=options.plain_path,
    metavar="FILE",
    default=Path("study.toml"),
    show_default=True,
    help="Study to be written; several systems become FILE-LABEL.",
)
@click.option("--force", is_flag=True, help="Replace studies that exist.")
@click.option("--quiet", is_flag=True, help="Only what is to be filled in.")
def draft(files: tuple[Path, ...], output: Path, force: bool, quiet: bool) -> None:
    """Look at FILES, print what they show and how sure that is, and write the study that describes them.

    What is certain or likely is filled in; likely values are marked.  What is doubtful begins with a question mark, with
    the candidates behind it, and combine refuses it by name.  Put "--" before file names that begin with a dash.
    """
    from reweight.drafting import draft_studies, study_text
    from reweight.files import refuse_target, write_text

    drafts = draft_studies(files)
    targets = [output.with_stem(f"{output.stem}-{each.label}") if each.label else output for each in drafts]
    texts = [study_text(each, output.parent) for each in drafts]
    for target in targets:
        refuse_target(target, force=force, inputs=files)
    for target, text in zip(targets, texts, strict=True):
        write_text(target, text, force=force, inputs=files)
    for target, each in zip(targets, drafts, strict=True):
        if not quiet:
            _print(each, target)
        _print_next(each, target)


def _print(each: Draft, target: Path) -> None:
    files = sum(len(run.looks) for run in each.runs)
    click.echo(
        f"{printable(str(target))}: {screen.counted(len(each.runs), 'run')} of {screen.counted(files, 'file')}"
    )
    rows = [
        (str(look.path), f"{look.rows:,}", *_temperature(run), _because(run, look.trouble))
        for run in each.runs
        for look in run.looks
    ]
    rows += [(str(look.path), "0", "", "", f"not in the study: {look.trouble}") for look in each.unplaced]
    _print_columns(("file", "rows", "temperature", "how sure", "because"), rows)
    click.echo()
    _print_columns(
        ("key", "value", "how sure", "because"),
        [(key, _value(guess), guess.sureness, guess.why) for key, guess in each.keys.items()],
    )
    if each.offers:
        names = ", ".join(printable(offer.name) for offer in each.offers)
        click.echo(f"  observables offered in the study, switched off: {names}")
    click.echo()


def _print_columns(header: Sequence[str], rows: Sequence[Sequence[str]]) -> None:
    screen.print_table(header, rows, indent=2, left=range(len(header)))


def _temperature(run: DraftRun) -> tuple[str, str]:
    if run.guess is None:
        return "in a column", "certain"
    prefix = "beta " if run.key == "beta" else ""
    return prefix + _value(run.guess), run.guess.sureness


def _because(run: DraftRun, trouble: str) -> str:
    if run.left_out:
        return f"left out: {run.left_out}"
    parts = ["" if run.guess is None else run.guess.why, run.note]
    parts.append(f"refused when combined: {trouble}" if trouble else "")
    return "; ".join(part for part in parts if part)


def _value(guess: Guess) -> str:
    from reweight.study.questions import question

    if guess.open:
        return question(guess.candidates)
    return f"{guess.value:g}" if isinstance(guess.value, float) else str(guess.value)


def _print_next(each: Draft, target: Path) -> None:
    name, quoted = printable(str(target)), printable(shlex.quote(str(target)))
    left_out = sum(bool(run.left_out) for run in each.runs) + len(each.unplaced)
    if left_out:
        verb = "is" if left_out == 1 else "are"
        click.echo(f"{screen.counted(left_out, 'file')} cannot be read and {verb} left out of {name}")
    to_do = f"fill in {', '.join(each.open_keys)} there, then" if each.open_keys else "next"
    click.echo(f"wrote {name}; {to_do}: reweight combine {quoted}")
