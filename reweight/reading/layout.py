"""How a text file is laid out: comments, header, delimiter, number of columns; told by its first lines.

What the study declares under ``[format]`` wins over what the lines look like.
"""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from reweight.reading.blocks import LineStream
from reweight.reading.source import refusal
from reweight.study import Format

__all__ = ["BLANKS", "Layout", "find_layout", "is_number", "split", "with_point"]

BLANKS = " "  # the delimiter that stands for any number of blanks and tabs
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")

_COMMENT_PREFIXES = ("#", ";", "!", "%", "@", "&", "//")
_NAMING_PREFIXES = ("#", ";", "!", "%", "//")  # lines with @ and & are commands to plotting programs
_NO_WORD = re.compile(r"[+-]?(?:nan|inf|infinity)|\*+", re.IGNORECASE)
_REMEMBERED_COMMENTS = 1000
_UNIT_AFTER_BLANK = re.compile(r"\s+(?=[\[(])")


@dataclass(frozen=True, slots=True, kw_only=True)
class Layout:
    """Where the numbers of a text file are.

    Attributes
    ----------
    names : tuple of str
        One a column.
    numeric : tuple of bool
        Whether the first row holds a number there.
    delimiter : str
        One character; :data:`BLANKS` for blanks and tabs in any number.
    decimal : str
        Point or comma.
    comment_prefixes : tuple of str
        What begins a line that is no row.
    first_line : int
        Number of the line of the first row, counted from 1.
    """

    names: tuple[str, ...]
    numeric: tuple[bool, ...]
    delimiter: str
    decimal: str
    comment_prefixes: tuple[str, ...]
    first_line: int


def is_number(field: str, decimal: str) -> bool:
    """Whether a field is a decimal number, written with this decimal sign."""
    return _NUMBER.fullmatch(with_point(field, decimal)) is not None


def with_point(field: str, decimal: str) -> str:
    """Write a number with a decimal point; with a comma declared, a point makes it no number."""
    return field if decimal == "." else field.replace(".", "?").replace(decimal, ".")


def split(line: str, delimiter: str) -> list[str]:
    """Fields of a line, without the blanks around them."""
    line = line.rstrip("\r\n")
    fields = re.split(r"[ \t]+", line.strip(" \t")) if delimiter == BLANKS else line.split(delimiter)
    return [field.strip(" \t\v\f") for field in fields]


def find_layout(path: Path, lines: LineStream, declared: Format) -> Layout:
    """Read up to and including the first row.

    Raises
    ------
    DataFileError
        There is no row, or the header and the first row disagree.
    """
    prefixes = declared.comment or tuple(each for each in _COMMENT_PREFIXES if each != declared.delimiter)
    comments: deque[str] = deque(maxlen=_REMEMBERED_COMMENTS)
    header: tuple[int, str] | None = None
    line = 0
    while data := lines.read(0, line + 1):
        line += 1
        text = data.decode("utf-8", errors="replace")
        bare = text.strip()
        if not bare:
            continue
        if bare.startswith(prefixes):
            if declared.header is not False and bare.startswith(declared.comment or _NAMING_PREFIXES):
                comments.append(bare[max(len(each) for each in prefixes if bare.startswith(each)) :].strip())
            continue
        if header is None and _is_header(bare, declared):
            header = (line, bare)
            continue
        return _layout_of(path, text, line, header, comments, prefixes, declared)
    if line == 0:
        raise refusal(path, "data file must hold rows of numbers; it is empty. Leave it out of the study.")
    raise refusal(path, f"data file must hold rows of numbers; all its {line} lines are header or comment.")


def _layout_of(
    path: Path,
    row: str,
    line: int,
    header: tuple[int, str] | None,
    comments: Sequence[str],
    prefixes: tuple[str, ...],
    declared: Format,
) -> Layout:
    delimiter = declared.delimiter or _guessed_delimiter(row, declared.decimal)
    fields = split(row, delimiter)
    names = tuple(str(place) for place in range(1, len(fields) + 1))
    if header is not None:
        header_line, text = header
        words = _words(text, delimiter, len(fields))
        if words is None:
            raise refusal(
                path,
                f"header must name every column; got {len(split(text, delimiter))} names for {len(fields)} columns "
                f"(first row: line {line}). Correct it, begin it with {prefixes[0]!r}, or say how the file is "
                "written under [format] in the study.",
                line=header_line,
            )
        names = words
    else:
        for comment in reversed(comments):
            words = _words(comment, delimiter, len(fields))
            if words is not None and not any(_looks_like_value(word) for word in words):
                names = words
                break
    return Layout(
        names=names,
        numeric=tuple(is_number(field, declared.decimal) for field in fields),
        delimiter=delimiter,
        decimal=declared.decimal,
        comment_prefixes=prefixes,
        first_line=line,
    )


def _is_header(text: str, declared: Format) -> bool:
    if declared.header is not None:
        return declared.header
    delimiter = declared.delimiter or _guessed_delimiter(text, declared.decimal)
    return not any(_looks_like_value(word) for word in split(text, delimiter))


def _looks_like_value(word: str) -> bool:
    return _NUMBER.fullmatch(word.replace(",", ".")) is not None or _NO_WORD.fullmatch(word) is not None


def _guessed_delimiter(text: str, decimal: str) -> str:
    if ";" in text:
        return ";"
    if "," in text and decimal != ",":
        return ","
    if "\t" in text.strip():
        fields = split(text, "\t")
        several_numbers = any(" " in field and all(map(_looks_like_value, field.split())) for field in fields)
        if fields[0] and not several_numbers:
            return "\t"
    return BLANKS


def _words(text: str, delimiter: str, count: int) -> tuple[str, ...] | None:
    """Names in a line of words, if there are as many as columns."""
    for candidate in (delimiter, _guessed_delimiter(text, "."), BLANKS):
        # "potential [kJ/mol]" is one name where blanks separate
        line = _UNIT_AFTER_BLANK.sub("", text) if candidate == BLANKS else text
        words = tuple(word.strip("\"',;") for word in split(line, candidate))
        if len(words) == count:
            return words
    return None
