"""Options that several commands share, each written once."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

import click

__all__ = [
    "at_options",
    "bin_option",
    "flattened",
    "level_option",
    "linear_question_options",
    "output_options",
    "plain_path",
    "question_options",
    "range_options",
    "single_temperatures",
    "table_options",
]

Command = TypeVar("Command", bound=Callable[..., Any])

plain_path = click.Path(path_type=Path)


class Numbers(click.ParamType):
    """One number, or several parted by commas."""

    name = "T[,T...]"

    def convert(
        self, value: Any, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[float, ...]:
        """Read the numbers."""
        if isinstance(value, tuple):
            return value
        try:
            return tuple(float(part) for part in str(value).split(","))
        except ValueError:
            self.fail(f"{value!r} must be a number, or several parted by commas (300,310.5)", param, ctx)


def _apply(command: Command, *options: Callable[[Command], Command]) -> Command:
    for option in reversed(options):
        command = option(command)
    return command


single_temperatures = click.option(
    "--at", type=Numbers(), multiple=True, help="Temperatures; repeatable, or parted by commas."
)
per_count_option = click.option(
    "--per-count", is_flag=True, help="Answers per particle or site, as the study counts them."
)
energy_unit_option = click.option(
    "--energy-unit", metavar="UNIT", help="Unit of energies in the answers.  [default: the study's]"
)
beyond_reach_option = click.option(
    "--beyond-reach", is_flag=True, help="Answer where the runs do not support it, too; marked."
)
csv_option = click.option("--csv", type=plain_path, metavar="FILE", help="Write a table with all digits.")
level_option = click.option(
    "--level", type=float, default=0.95, show_default=True, help="Level of confidence intervals."
)
bin_option = click.option(
    "--bin-width",
    type=float,
    metavar="E",
    help="Width of energy bins.  [default: single levels, or two of the finest bins kept]",
)


def flattened(at: tuple[tuple[float, ...], ...]) -> list[float]:
    """Return all temperatures named by --at, in their order."""
    return [temperature for group in at for temperature in group]


def at_options(command: Command) -> Command:
    """Single temperatures."""
    return _apply(
        command,
        single_temperatures,
        click.option(
            "--points", type=int, default=None, help="Temperatures between --from and --to.  [default: 101]"
        ),
    )


def range_options(command: Command) -> Command:
    """A range of temperatures."""
    return _apply(
        command,
        click.option(
            "--from", "lowest", type=float, metavar="T", help="Lowest temperature.  [default: end of reach]"
        ),
        click.option(
            "--to", "highest", type=float, metavar="T", help="Highest temperature.  [default: end of reach]"
        ),
    )


def question_options(command: Command) -> Command:
    """How an answer is to be given."""
    return _apply(
        command,
        per_count_option,
        energy_unit_option,
        level_option,
        click.option(
            "--errors",
            type=click.Choice(["linear", "bootstrap"]),
            default="linear",
            show_default=True,
            help="Intervals by linear response, or with the shape that resampling in blocks shows.",
        ),
        click.option(
            "--resamples", type=int, default=1000, show_default=True, help="Resamples for bootstrap errors."
        ),
        click.option("--seed", type=int, default=0, show_default=True, help="Of the resamples."),
        beyond_reach_option,
    )


def linear_question_options(command: Command) -> Command:
    """How an answer is to be given whose errors come from linear response alone."""
    return _apply(command, per_count_option, energy_unit_option, level_option, beyond_reach_option)


def output_options(command: Command) -> Command:
    """Where an answer goes."""
    picture = click.option(
        "--plot", type=plain_path, metavar="FILE", help="Draw a picture: .pdf, .png or .svg."
    )
    return csv_option(picture(_printing_options(command)))


def table_options(command: Command) -> Command:
    """Where an answer goes that has no picture."""
    return csv_option(_printing_options(command))


def _printing_options(command: Command) -> Command:
    return _apply(
        command,
        click.option("--json", "as_json", is_flag=True, help="Print JSON in place of the table."),
        click.option("--force", is_flag=True, help="Replace files that exist."),
        click.option("--quiet", is_flag=True, help="No messages beside the answer."),
    )
