"""How a text file is laid out: comments, header, delimiter, number of columns; told by its first lines.

What the study declares under ``[format]`` wins over what the lines look like.
"""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Protocol

from reweight.reading.blocks import OLD_LINE_ENDS
from reweight.reading.source import refusal
from reweight.study import Format

__all__ = ["BLANKS", "Layout", "Lines", "find_layout", "split"]

BLANKS = " "  # the delimiter that stands for any number of blanks and tabs
_NUMBER = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eEdD][+-]?[0-9]+)?")
_FORTRAN = str.maketrans("dD", "ee")
# 1,234 may be a thousand and more; 1,5 and 0,123 may not.
_DECIMAL_COMMA = re.compile(r"[+-]?(?:0?,[0-9]+|[0-9]+,(?![0-9]{3}(?![0-9]))[0-9]+)(?:[eEdD][+-]?[0-9]+)?")
_NARROW_BLANKS = str.maketrans({"\u00a0": " ", "\u2009": " ", "\u202f": " "})

_COMMENT_PREFIXES = ("#", ";", "!", "%", "@", "&", "//")
_NAMING_PREFIXES = ("#", ";", "!", "%", "//")  # lines with @ and & are commands to plotting programs
# What is no name of a column though it is no number either: it must not be taken for a header and skipped.
_NO_WORD = re.compile(
    r"[+-]?(?:nan|inf|infinity)|\*+|[+-]?[0-9.][0-9.,'_+-]*(?:[ed][0-9.+-]+)?", re.IGNORECASE
)
_REMEMBERED_COMMENTS = 1000
_UNIT_AFTER_BLANK = re.compile(r"\s+(?=[\[(])")


class Lines(Protocol):
    """Lines of a text file, as :class:`reweight.reading.blocks.LineStream` reads them."""

    def read(self, size: int, line: int) -> bytes:
        """Read the next line."""
        ...


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
    thousands : str or None
        What separates groups of three digits.
    comment_prefixes : tuple of str
        What begins a line that is no row.
    first_line : int
        Number of the line of the first row, counted from 1.
    """

    names: tuple[str, ...]
    numeric: tuple[bool, ...]
    delimiter: str
    decimal: str
    thousands: str | None
    comment_prefixes: tuple[str, ...]
    first_line: int

    def number(self, field: str) -> float | None:
        """Value of a field, rounded correctly; None if it is no number, infinite if it is too large."""
        return _number(field, self.decimal, self.thousands)


def _number(field: str, decimal: str, thousands: str | None) -> float | None:
    """Value of a field written with these signs.

    Exponents may have the letters of Fortran.  Without a letter, as in 1.5-103, a field is no number: it could be two
    of them run together.
    """
    if thousands == " ":
        field = field.translate(_NARROW_BLANKS)
    if thousands is not None and thousands in field:
        whole = rf"[+-]?[0-9]{{1,3}}(?:{re.escape(thousands)}[0-9]{{3}})+"
        if re.fullmatch(rf"{whole}(?:{re.escape(decimal)}[0-9]*)?(?:[eEdD][+-]?[0-9]+)?", field) is None:
            return None
        field = field.replace(thousands, "")
    if decimal != ".":
        field = field.replace(".", "?").replace(decimal, ".")
    return float(field.translate(_FORTRAN)) if _NUMBER.fullmatch(field) else None


def split(line: str, delimiter: str) -> list[str]:
    """Fields of a line, without the blanks around them."""
    line = line.rstrip("\r\n")
    fields = re.split(r"[ \t]+", line.strip(" \t")) if delimiter == BLANKS else line.split(delimiter)
    return [field.strip(" \t\v\f") for field in fields]


def find_layout(path: Path, lines: Lines, declared: Format) -> Layout:
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
    old_line_ends = False
    while data := lines.read(0, line + 1):
        line += 1
        text = data.decode("utf-8", errors="replace")
        bare = text.strip()
        if not bare:
            continue
        old_line_ends = old_line_ends or "\r" in text.rstrip("\r\n")
        if bare.startswith(prefixes):
            if declared.header is not False and bare.startswith(declared.comment or _NAMING_PREFIXES):
                comments.append(bare[max(len(each) for each in prefixes if bare.startswith(each)) :].strip())
            continue
        if header is None and _is_header(bare, declared):
            header = (line, bare)
            continue
        if old_line_ends:
            break
        return _layout_of(path, text, line, header, comments, prefixes, declared)
    if old_line_ends:
        raise refusal(
            path, f"lines must end with a line feed; got carriage returns inside. {OLD_LINE_ENDS}", line=line
        )
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
    delimiter = declared.delimiter or _guessed_delimiter(row, declared)
    fields = split(row, delimiter)
    if delimiter == declared.thousands:
        raise refusal(
            path,
            f"what separates columns must not separate thousands as well; got {delimiter!r} for both. Correct "
            "delimiter or thousands under [format].",
            line=line,
        )
    if len(fields) > declared.most_columns:
        raise refusal(
            path,
            f"rows must have at most {declared.most_columns} columns; got {len(fields)}. If they are meant to have as "
            "many, raise most_columns under [format] in the study.",
            line=line,
        )
    decimal = declared.decimal or _guessed_decimal(fields, delimiter, declared.thousands)
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
        numeric=tuple(_number(field, decimal, declared.thousands) is not None for field in fields),
        delimiter=delimiter,
        decimal=decimal,
        thousands=declared.thousands,
        comment_prefixes=prefixes,
        first_line=line,
    )


def _is_header(text: str, declared: Format) -> bool:
    if declared.header is not None:
        return declared.header
    delimiter = declared.delimiter or _guessed_delimiter(text, declared)
    return not any(_looks_like_value(word) for word in split(text, delimiter))


def _looks_like_value(word: str) -> bool:
    return _NUMBER.fullmatch(word.replace(",", ".")) is not None or _NO_WORD.fullmatch(word) is not None


def _guessed_delimiter(text: str, declared: Format) -> str:
    if ";" in text:
        return ";"
    if "," in text and "," not in (declared.decimal, declared.thousands) and declared.thousands != ".":
        return ","
    if "\t" in text.strip():
        fields = split(text, "\t")
        several_numbers = any(" " in field and all(map(_looks_like_value, field.split())) for field in fields)
        if fields[0] and not several_numbers:
            return "\t"
    return BLANKS


def _guessed_decimal(fields: Sequence[str], delimiter: str, thousands: str | None) -> str:
    """Tell the decimal sign by the first row: a comma only where it cannot separate columns or thousands."""
    if thousands == ".":
        return ","
    if thousands == "," or delimiter in (",", BLANKS):
        return "."
    plain = (field.translate(_NARROW_BLANKS).replace(thousands or "", "") for field in fields)
    return "," if any(_DECIMAL_COMMA.fullmatch(field) for field in plain) else "."


def _words(text: str, delimiter: str, count: int) -> tuple[str, ...] | None:
    """Names in a line of words, if there are as many as columns."""
    for candidate in (delimiter, _guessed_delimiter(text, Format()), BLANKS):
        # "potential [kJ/mol]" is one name where blanks separate
        line = _UNIT_AFTER_BLANK.sub("", text) if candidate == BLANKS else text
        words = tuple(word.strip("\"',;") for word in split(line, candidate))
        if len(words) == count:
            return words
    return None
