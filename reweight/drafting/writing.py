"""The text of a drafted study: every value escaped, how sure it is beside it, and what is open marked."""

from __future__ import annotations

import os
from collections.abc import Iterator, Sequence
from pathlib import Path

from reweight.drafting.draft import Draft, Offer
from reweight.drafting.guess import Guess, Sureness
from reweight.drafting.runs import DraftRun
from reweight.notation import printable
from reweight.reading.source import refusal
from reweight.study.questions import question

__all__ = ["study_text", "toml_value"]

_SECTIONS = ("", "system", "conditions", "format", "columns")
_SHORT_ESCAPES = {'"': '\\"', "\\": "\\\\", "\n": "\\n", "\t": "\\t", "\r": "\\r"}


def study_text(draft: Draft, folder: Path) -> str:
    """Write a draft as a study file.

    Parameters
    ----------
    draft : Draft
    folder : pathlib.Path
        Where the study will lie; files are named relative to it.

    Returns
    -------
    str
        TOML.

    Raises
    ------
    DataFileError
        The name of a file is no text.
    """
    return "\n".join(_lines(draft, folder)) + "\n"


def _lines(draft: Draft, folder: Path) -> Iterator[str]:
    yield "# Drafted from the files named below; likely values are marked."
    if draft.open_keys:
        yield f"# To be filled in, where the values begin with a question mark: {', '.join(draft.open_keys)}."
    yield "schema = 1"
    yield f"title = {toml_value(draft.label)}"
    for section in _SECTIONS:
        entries = {
            key.rpartition(".")[2]: guess
            for key, guess in draft.keys.items()
            if key.rpartition(".")[0] == section
        }
        if entries and section:
            yield from ("", f"[{section}]")
        for key, guess in entries.items():
            yield _line(key, guess)
    yield from _offer_lines(draft.offers)
    for run in draft.runs:
        yield from _run_lines(run, folder)
    for look in draft.unplaced:
        yield from (
            "",
            f"# not in the study: {printable(str(look.path))}",
            f"#   {printable(look.trouble)}",
        )


def _line(key: str, guess: Guess) -> str:
    if guess.open:
        return f"{key} = {toml_value(question(guess.candidates))}  # fill in: {printable(guess.why)}"
    assert guess.value is not None  # only what is open has none
    mark = f"  # likely: {printable(guess.why)}" if guess.sureness is Sureness.LIKELY else ""
    return f"{key} = {toml_value(guess.value)}{mark}"


def _offer_lines(offers: Sequence[Offer]) -> Iterator[str]:
    if offers:
        yield from ("", "# Observables these files offer; take the hash away from those wanted.")
    for offer in offers:
        yield f"# [observables.{offer.name}]"
        yield f"# column = {toml_value(offer.column)}"
        yield f"# unit = {toml_value(offer.unit or '1')}"


def _run_lines(run: DraftRun, folder: Path) -> Iterator[str]:
    yield from ("", f"[[{run.table}]]", f"name = {toml_value(run.name)}")
    if run.guess is not None:
        yield _line(run.key, run.guess)
    names = ", ".join(toml_value(_relative(path, folder)) for path in run.files)
    yield f"files = [{names}]" + (f"  # {printable(run.note)}" if run.note else "")
    if run.left_out:
        yield from ("use = false", f"reason = {toml_value(printable(run.left_out))}")
    for look in run.looks:
        if look.trouble and not run.left_out:
            yield f"# {printable(look.trouble)}"


def _relative(path: Path, folder: Path) -> str:
    """Name of a file seen from a folder; both through their true places, since .. does not undo a symbolic link."""
    true = os.path.join(os.path.realpath(path.parent), path.name)
    name = Path(os.path.relpath(true, os.path.realpath(folder))).as_posix()
    try:
        name.encode("utf-8")
    except UnicodeEncodeError:
        raise refusal(
            path, "name of a data file must be UTF-8, because the study holds it. Rename it."
        ) from None
    return name


def toml_value(value: str | int | float | bool) -> str:
    r"""Write a value in TOML.

    Examples
    --------
    >>> toml_value("a\nb"), toml_value(300.0), toml_value(True)
    ('"a\\nb"', '300.0', 'true')
    """
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f'"{"".join(map(_escaped, value))}"'
    return repr(value)


def _escaped(letter: str) -> str:
    if letter in _SHORT_ESCAPES:
        return _SHORT_ESCAPES[letter]
    return letter if letter.isprintable() else f"\\U{ord(letter):08x}"
