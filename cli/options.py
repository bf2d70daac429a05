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
    "output_options",
    "plain_path",
    "question_options",
    "range_options",
    "single_temperatures",
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
        click.option(
            "--per-count", is_flag=True, help="Answers per particle or site, as the study counts them."
        ),
        click.option(
            "--energy-unit", metavar="UNIT", help="Unit of energies in the answers.  [default: the study's]"
        ),
        level_option,
        click.option(
            "--errors",
            type=click.Choice(["linear", "bootstrap"]),
            default="linear",
            show_default=True,
            callback=_only_linear,
            help="How error bars are made (bootstrap: not built yet).",
        ),
        click.option(
            "--beyond-reach", is_flag=True, help="Answer where the runs do not support it, too; marked."
        ),
    )


def _only_linear(ctx: click.Context, param: click.Parameter, value: str) -> str:
    if value != "linear":
        raise click.BadParameter(
            "'bootstrap' is known but this version cannot use it yet; use linear.", ctx, param
        )
    return value


def output_options(command: Command) -> Command:
    """Where an answer goes."""
    return _apply(
        command,
        click.option("--csv", type=plain_path, metavar="FILE", help="Write a table with all digits."),
        click.option("--plot", type=plain_path, metavar="FILE", help="Draw a picture: .pdf, .png or .svg."),
        click.option("--json", "as_json", is_flag=True, help="Print JSON in place of the table."),
        click.option("--force", is_flag=True, help="Replace files that exist."),
        click.option("--quiet", is_flag=True, help="No messages beside the answer."),
    )
