"""``reweight explain``: short texts on the words the program uses."""

from __future__ import annotations

import textwrap

import click

__all__ = ["explain"]

WIDEST = 90


@click.command(short_help="What a word on the screen means, and why its limits are what they are.")
@click.argument("word", nargs=-1)
def explain(word: tuple[str, ...]) -> None:
    """Print the text on WORD; without one, list the words."""
    from reweight.guide import text, words

    if not word:
        for name, first in words().items():
            click.echo(f"{name:24}  {textwrap.shorten(first, WIDEST, placeholder=' ...')}")
        return
    click.echo(text(" ".join(word)))
