"""Tables in text files, streamed.

Blocks of whole lines go through the C parser of pandas with every column typed, which then refuses long rows and
fields that are no number, and pads short rows with a field that is no number either.  Whatever it refuses, and
whatever it might have misread, is read again line by line: that reading defines what a row is, and names the line
that is none.
"""

from __future__ import annotations

import io
import math
import re
from collections.abc import Iterator, Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from reweight.reading.blocks import BLOCK_SIZE, OLD_LINE_ENDS, Block, LineStream, blocks, opened
from reweight.reading.known import KnownPart
from reweight.reading.layout import BLANKS, split
from reweight.reading.ledger import FileLedger
from reweight.reading.sections import Sections, find_opening
from reweight.reading.source import refusal
from reweight.study import Format

__all__ = ["TextTable"]

_FORTRAN = bytes.maketrans(b"dD", b"ee")
_TWO_NUMBERS = re.compile(r"[+-]?[0-9.]+[+-][0-9]{3}")
_SHOWN = 60  # characters of a line or field in a message


class TextTable:
    """Rows of numbers in a text file.

    Parameters
    ----------
    path : pathlib.Path
    declared : Format
        What the study says about the look of its files.
    block_size : int
        Bytes parsed at a time; has no influence on the numbers.
    known : KnownPart, optional
        Beginning of the file, whose rows are left out.

    Raises
    ------
    DataFileError
        The file holds no row.
    """

    def __init__(
        self,
        path: Path,
        declared: Format,
        *,
        block_size: int = BLOCK_SIZE,
        known: KnownPart | None = None,
    ) -> None:
        self.path = path
        self._declared = declared
        self._block_size = block_size
        self._known = known
        with opened(path, declared) as lines:
            self._opening = find_opening(path, lines, declared)
        self._layout = self._opening.layout

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the columns."""
        return self._layout.names

    @property
    def _first_line(self) -> int:
        return self._layout.first_line if self._known is None else self._known.ledger.lines + 1

    def chunks(self, columns: Sequence[int], ledger: FileLedger) -> Iterator[NDArray[np.float64]]:
        """Read columns from the first row to the last; see :class:`reweight.reading.source.Table`."""
        with opened(self.path, self._declared, self._known) as lines:
            first_line = self._first_line
            if self._known is None:
                ledger.skipped_lines += self._opening.skipped
                for line in range(1, first_line):
                    ledger.blank_lines += not lines.read(0, line).strip()
            sections = Sections(self.path, self._opening, ledger)
            for block in blocks(lines, size=self._block_size, first_line=first_line):
                for piece in sections.pieces(self._without_unfinished_line(block)):
                    rows = self._parsed(piece, columns)
                    if rows is None:
                        rows = self._scanned(piece, columns, ledger)
                    ledger.rows_read += len(rows)
                    if len(rows):
                        yield rows
                ledger.lines = block.first_line - 1 + block.line_ends
            _note_source(lines, ledger)

    def section_starts(self, column: int) -> list[float]:
        """First number of a column in each section; see :class:`reweight.reading.source.Table`."""
        ledger = FileLedger(str(self.path))
        with opened(self.path, self._declared, self._known) as lines:
            if self._known is None:
                for line in range(1, self._first_line):
                    lines.read(0, line)
            else:
                ledger.repeated_headers = self._known.ledger.repeated_headers
            starts = [math.inf] * ledger.repeated_headers
            sections = Sections(self.path, self._opening, ledger)
            for block in blocks(lines, size=self._block_size, first_line=self._first_line):
                for piece in sections.pieces(self._without_unfinished_line(block)):
                    missing = ledger.repeated_headers - len(starts)
                    if missing >= 0 and (first := self._first_number(piece, column)) is not None:
                        starts += [math.inf] * missing + [first]  # a section without rows replaces none
        return starts

    def _first_number(self, piece: Block, column: int) -> float | None:
        for place, line in enumerate(piece.data.split(b"\n")[:-1]):
            one = Block(line + b"\n", piece.first_line + place, 1)
            if len(rows := self._scanned(one, [column], FileLedger(""))):
                return float(rows[0, 0])
        return None

    def _without_unfinished_line(self, block: Block) -> Block:
        if block.data.endswith(b"\n"):
            return block
        cut = block.data.rfind(b"\n") + 1
        rest = block.data[cut:].decode("utf-8", errors="replace").strip()
        if rest and not rest.startswith(self._layout.comment_prefixes):
            raise refusal(
                self.path,
                f"the last line must end with a line end, or its last number may be cut short; got {rest[-_SHOWN:]!r}. "
                "If the row is complete, add a line end; otherwise delete the row.",
                line=block.first_line + block.line_ends,
            )
        return Block(block.data[:cut], block.first_line, block.line_ends)

    def _parsed(self, block: Block, columns: Sequence[int]) -> NDArray[np.float64] | None:
        """Numbers of a block in which nothing is in doubt; None if anything is."""
        import pandas

        layout = self._layout
        numeric = layout.numeric
        if layout.thousands is not None or not all(numeric[column] for column in columns):
            return None
        if not all(numeric) and any(prefix.encode() in block.data for prefix in layout.comment_prefixes):
            return None  # words in a column of words may be a comment
        data = block.data
        if data.count(b"\r") != data.count(b"\r\n"):
            return None  # a carriage return alone would end a line
        if b"D" in data or b"d" in data:
            data = data.translate(_FORTRAN)
        try:
            frame = pandas.read_csv(
                io.BytesIO(data),
                sep=r"\s+" if layout.delimiter == BLANKS else layout.delimiter,
                decimal=layout.decimal,
                header=None,
                index_col=False,
                dtype={column: np.float64 if number else str for column, number in enumerate(numeric)},
                na_filter=False,
                quoting=3,  # csv.QUOTE_NONE
                engine="c",
                low_memory=False,
            )
        except ValueError:  # pandas.errors.ParserError and UnicodeDecodeError are such
            return None
        if frame.shape != (block.line_ends, len(numeric)):
            return None
        if not numeric[-1] and (frame.iloc[:, -1] == "").any():
            return None  # a short row is padded with this
        rows = np.column_stack([frame[column].to_numpy() for column in columns])
        return rows if np.isfinite(rows).all() else None

    def _scanned(self, block: Block, columns: Sequence[int], ledger: FileLedger) -> NDArray[np.float64]:
        """Numbers of a block read line by line, or the line that holds none."""
        layout = self._layout
        rows = []
        for line, raw in enumerate(block.data.split(b"\n")[:-1], start=block.first_line):
            text = raw.decode("utf-8", errors="replace")
            bare = text.strip()
            if not bare:
                ledger.blank_lines += 1
                continue
            if bare.startswith(layout.comment_prefixes):
                continue
            fields = split(text, layout.delimiter)
            if len(fields) != len(layout.names):
                raise refusal(
                    self.path,
                    f"rows must have {len(layout.names)} columns like the first one (line {layout.first_line}); "
                    f"got {len(fields)} in {_shortened(bare)}. "
                    + (
                        OLD_LINE_ENDS
                        if "\r" in text.rstrip("\r")
                        else "A simulation that was stopped or started again may have damaged it: correct or delete it."
                    ),
                    line=line,
                )
            rows.append([self._number(fields[column], column, line) for column in columns])
        return np.array(rows, dtype=np.float64).reshape(len(rows), len(columns))

    def _number(self, field: str, column: int, line: int) -> float:
        layout = self._layout
        name = layout.names[column]
        value = layout.number(field)
        if value is not None:
            if math.isfinite(value):
                return value
            raise refusal(
                self.path,
                f"column {name!r} must hold numbers below 1.8e308; got {_shortened(field)}.",
                line=line,
            )
        raise refusal(
            self.path,
            f"column {name!r} must hold finite numbers; got {_shortened(field)}.{_advice(field, layout.thousands)}",
            line=line,
        )


def _note_source(lines: LineStream, ledger: FileLedger) -> None:
    ledger.size = lines.size
    ledger.sha256 = lines.sha256


def _advice(field: str, thousands: str | None) -> str:
    if not field:
        return " An empty field is no number."
    if set(field) == {"*"}:
        return " Stars are a number that did not fit its field: print it with more digits."
    if thousands is None and field.count(",") == 1:
        return (
            ' If this is a decimal comma, say decimal = "," under [format] in the study; if it separates thousands, '
            'say thousands = ",".'
        )
    if thousands is None and re.fullmatch(r"[+-]?[0-9]{1,3}(,[0-9]{3})+(\.[0-9]*)?", field):
        return ' If commas separate thousands, say thousands = "," under [format] in the study.'
    if _TWO_NUMBERS.fullmatch(field):
        return " Two numbers run together, or an exponent without its letter: print wider fields, and exponents with E."
    return ""


def _shortened(text: str) -> str:
    return repr(text if len(text) <= _SHOWN else f"{text[:_SHOWN]}...")
