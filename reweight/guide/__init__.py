"""The texts behind ``reweight explain WORD``; the user documentation is made of the same files.

One Markdown file a word; its first line is a heading, its first sentence the summary.
"""

from __future__ import annotations

import difflib
import re
from importlib.resources import files

from reweight.errors import InputError

__all__ = ["text", "words"]


def words() -> dict[str, str]:
    """Words that are explained, with the first sentence of each."""
    found = {}
    for entry in sorted(files(__name__).iterdir(), key=lambda each: each.name):
        if entry.name.endswith(".md"):
            body = entry.read_text("utf-8").split("\n\n", 1)[1]
            first = re.split(r"\.\s", body, maxsplit=1)[0]
            found[entry.name.removesuffix(".md")] = " ".join(first.split()).rstrip(".")
    return found


def text(word: str) -> str:
    """Return the text on a word.

    Raises
    ------
    InputError
        There is none; the error names the nearest words.
    """
    known = list(words())
    wanted = word.strip().lower().replace(" ", "-").replace("_", "-")
    if wanted not in known:
        near = difflib.get_close_matches(wanted, known, n=3, cutoff=0.6)
        hint = (
            f"Did you mean {' or '.join(near)}?" if near else "Without a word, reweight explain lists them."
        )
        raise InputError(f"a word must be one of those explained; got {word!r}. {hint}")
    return (files(__name__) / f"{wanted}.md").read_text("utf-8").strip()
