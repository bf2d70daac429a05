"""What is printed: tables for people, JSON and CSV for machines, messages on the error stream."""

from __future__ import annotations

import csv
import hashlib
import io
import json
import math
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from reweight.files import refuse_contents, refuse_target, write_text
from reweight.notation import printable

if TYPE_CHECKING:
    import xarray as xr

    from reweight.density_of_states import DensityOfStates, Description
    from reweight.uncertainty.resampling import Resamples

__all__ = [
    "PARTS",
    "amount",
    "counted",
    "echo_temperatures",
    "envelope",
    "file_envelope",
    "message",
    "opened",
    "plain",
    "print_json",
    "print_table",
    "progress_bar",
    "resamples_of",
    "tell_extrapolated",
    "tell_outside",
    "tell_written",
    "titled",
    "units_text",
    "write_csv",
]


# A value, its standard error and the ends of its interval, as columns of a table.
PARTS = ("", "_standard_error", "_lower", "_upper")


def titled(name: str, values: xr.DataArray) -> str:
    """Heading of a column with its unit, if it has one."""
    unit = values.attrs["units"]
    return name if unit == "1" else f"{name} [{unit}]"


def message(text: str, *, quiet: bool = False) -> None:
    """Tell something that is not the answer."""
    if not quiet:
        click.echo(printable(text), err=True)


def counted(number: int, noun: str) -> str:
    """Number and noun, with thousands parted and the plural where it belongs.

    Examples
    --------
    >>> counted(1, "run"), counted(20000, "row")
    ('1 run', '20,000 rows')
    """
    return f"{number:,} {noun}{'' if number == 1 else 's'}"


def amount(number: float) -> str:
    """Write a positive amount of independent samples: whole from 100 on, three digits below.

    Examples
    --------
    >>> amount(1304.2), amount(14.83)
    ('1,304', '14.8')
    """
    return f"{number:,.0f}" if number >= 100 else f"{number:.3g}"


def units_text(description: Description) -> str:
    """Kind and units of a study's energies in words."""
    unit = description.temperature_label
    kind = f"{description.energy_kind} energies"
    if description.pressure is not None:
        kind = f"enthalpies ({description.energy_kind} energy + pV at {description.pressure})"
    return (
        f"{kind} in {description.energy_unit}, temperatures in {unit}" if unit else f"{kind}, reduced units"
    )


def echo_temperatures(combined: DensityOfStates, temperatures: Sequence[float], *, quiet: bool) -> None:
    """Tell as which temperatures --at was read."""
    unit = combined.description.temperature_label
    message(f"at {', '.join(f'{t:g}' for t in temperatures)} {unit}".rstrip(), quiet=quiet)


def tell_outside(outside: int, total: int, *, beyond: bool, quiet: bool) -> None:
    """Tell how many temperatures are out of reach, if any."""
    if not outside:
        return
    what = "answered beyond the reach" if beyond else "out of reach and left empty"
    hint = "" if beyond else "; --beyond-reach shows unsupported estimates"
    message(
        f"{outside} of {counted(total, 'temperature')} {what} for at least one quantity{hint}", quiet=quiet
    )


def tell_extrapolated(number: int, *, quiet: bool) -> None:
    """Caution against answers that are not between simulated temperatures, if there are any."""
    if number:
        lie = "lies" if number == 1 else "lie"
        message(
            f"caution: {counted(number, 'temperature')} {lie} at or beyond the outermost runs, where intervals cover 1 to 4 "
            "points less than they say",
            quiet=quiet,
        )


def print_table(
    header: Sequence[str], rows: Iterable[Sequence[str]], *, indent: int = 0, left: Sequence[int] = (0,)
) -> None:
    """Print columns under their headings, numbers to the right and the columns in `left` to the left."""
    lines = [[printable(cell) for cell in row] for row in (header, *rows)]
    widths = [max(len(line[column]) for line in lines) for column in range(len(header))]
    for line in lines:
        cells = [
            cell.ljust(width) if column in left else cell.rjust(width)
            for column, (cell, width) in enumerate(zip(line, widths, strict=True))
        ]
        click.echo((" " * indent + "  ".join(cells)).rstrip())


def plain(value: Any) -> Any:
    """Value as JSON holds it: null for what is not finite, lists for arrays."""
    if isinstance(value, Mapping):
        return {str(key): plain(each) for key, each in value.items()}
    if hasattr(value, "tolist"):
        value = value.tolist()
    if isinstance(value, (list, tuple)):
        return [plain(each) for each in value]
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def envelope(
    combined: DensityOfStates,
    form: str,
    *,
    level: float | None,
    errors: str = "linear",
    seed: int | None = None,
    **content: Any,
) -> dict[str, Any]:
    """Wrap an answer in what every JSON answer carries."""
    from reweight.checks.all_checks import findings
    from reweight.checks.finding import worst

    return {
        "form": f"reweight {form} 1",
        "title": combined.description.title,
        "level": level,
        "errors": errors,
        "seed": seed,
        "verdict": str(worst(findings(combined))),
        **content,
    }


def file_envelope(combined: DensityOfStates, form: str, **content: Any) -> dict[str, Any]:
    """Wrap what is said of a combined file as a whole: units, findings and runs left out belong to it."""
    import dataclasses

    from reweight.checks.all_checks import findings

    return envelope(
        combined,
        form,
        level=None,
        units={
            "energy": combined.description.energy_unit,
            "temperature": combined.description.temperature_unit,
        },
        left_out=[dataclasses.asdict(each) for each in combined.left_out],
        sharing=combined.sharing,
        findings=[{**dataclasses.asdict(each), "verdict": str(each.verdict)} for each in findings(combined)],
        **content,
    )


def resamples_of(combined: DensityOfStates, count: int, seed: int, *, quiet: bool) -> Resamples:
    """Draw resamples, with a bar on a terminal; tell of those in which the runs fall apart."""
    from reweight.answers.resamples import draw_resamples

    with progress_bar("resampling", count, quiet=quiet) as advance:
        resamples = draw_resamples(combined, count, seed=seed, progress=advance)
    lost = int(resamples.disconnected.sum())
    if lost:
        message(
            f"in {lost} of {counted(count, 'resample')} some runs share no energies with the others: their overlap is weak; "
            "add runs between them",
            quiet=quiet,
        )
    return resamples


@contextmanager
def progress_bar(what: str, total: int, *, quiet: bool) -> Iterator[Callable[[int], None] | None]:
    """Show a bar on a terminal, nothing elsewhere."""
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn

    console = Console(stderr=True)
    if quiet or not console.is_terminal:
        yield None
        return
    with Progress(
        TextColumn(what), BarColumn(), MofNCompleteColumn(), console=console, transient=True
    ) as bar:
        task = bar.add_task("", total=total)
        yield lambda done: bar.update(task, advance=done)


def print_json(content: Mapping[str, Any]) -> None:
    """Print one JSON object."""
    click.echo(json.dumps(plain(content), indent=1, ensure_ascii=False, allow_nan=False))


def tell_written(*paths: Path | None, quiet: bool) -> None:
    """Tell which files were written."""
    written = [str(path) for path in paths if path is not None]
    if written:
        message(f"wrote {', '.join(written)}", quiet=quiet)


def write_csv(
    path: Path, header: Sequence[str], rows: Iterable[Sequence[Any]], *, force: bool, inputs: Iterable[Path]
) -> None:
    """Write a table with all digits; empty cells for what is not finite, labels made inert for spreadsheets."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow([_cell(each) for each in header])
    writer.writerows([[_cell(each) for each in row] for row in rows])
    write_text(path, text.getvalue(), force=force, inputs=inputs)


def _cell(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return repr(value) if math.isfinite(value) else ""
    text = str(value)
    return f"'{text}" if text[:1] in ("=", "+", "-", "@") else text


def opened(
    path: Path, *, quiet: bool, outputs: Sequence[Path | None] = (), force: bool = False
) -> DensityOfStates:
    """Open a combined file; say so once if its runs are not sound; refuse what must not become an output."""
    from reweight.checks.all_checks import findings
    from reweight.checks.finding import Verdict
    from reweight.saving import open_combined

    combined = open_combined(path)
    _refuse_outputs(combined, path, [each for each in outputs if each is not None], force=force)
    unsound = [finding for finding in findings(combined) if finding.verdict is Verdict.UNSOUND]
    if unsound:
        more = f" and {counted(len(unsound) - 1, 'more finding')}" if len(unsound) > 1 else ""
        message(f"unsound: {unsound[0].summary}{more}; {unsound[0].advice}", quiet=quiet)
    return combined


def _refuse_outputs(combined: DensityOfStates, path: Path, outputs: Sequence[Path], *, force: bool) -> None:
    """Refuse, before any work, names that are taken, named twice, or those of something the answers rest on."""
    study = combined.study_text.encode()
    inputs = {(int(each["size"]), str(each["sha256"])) for run in combined.runs for each in run.files}
    inputs.add((len(study), hashlib.sha256(study).hexdigest()))
    for place, output in enumerate(outputs):
        refuse_target(output, force=force, inputs=[path])
        refuse_contents(output, inputs)
        if output in outputs[:place]:
            raise click.UsageError(f"every output must have a name of its own; got {str(output)!r} twice.")
