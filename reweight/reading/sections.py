"""Parts of a text file that follow each other: headers written again, and tables of numbers between lines of a log.

A simulation that is started again often appends to its file and writes the header once more.  A log holds its table of
numbers between other lines; which header begins it is said in the study, and every line that belongs to no table is counted.
What remains are stretches of lines that must be rows.
"""

from __future__ import annotations

import dataclasses
import re
from collections import deque
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

from reweight.reading.blocks import Block
from reweight.reading.layout import Layout, Lines, find_layout, split
from reweight.reading.ledger import FileLedger
from reweight.reading.source import refusal
from reweight.study import Format

__all__ = ["Opening", "Sections", "find_opening"]

_REMEMBERED_LINES = 1000  # before the first row; the header is one of the last
_BETWEEN_NAMES = re.compile(r"[\s,;\"']+")
# Lines that begin as no number does, or have no digit; what comes of numbers gone wrong is looked at again.
_TEXT_LINE = re.compile(rb"^(?:[ \t]*[^\s0-9+\-.*][^\n]*|[^0-9\n]+)\n", re.MULTILINE)
_GONE_WRONG = re.compile(r"[+-]?(?:nan|inf|infinity)[,;]?|\*+[,;]?", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Opening:
    """A text file up to its first row.

    Attributes
    ----------
    layout : Layout
    header : bytes
        The line that names the columns, without blanks around it; empty if there is none.
    table : str
        The same as declared for a log, blanks collapsed; empty for a file that is one table.
    skipped : int
        Lines of a log before its first table.
    """

    layout: Layout
    header: bytes
    table: str
    skipped: int


class _Remembering:
    """Lines on their way to whoever reads them; the last of them are kept, and some may come first."""

    def __init__(self, lines: Lines, first: bytes = b"") -> None:
        self._lines = lines
        self._first = first
        self.kept: deque[bytes] = deque(maxlen=_REMEMBERED_LINES)

    def read(self, size: int, line: int) -> bytes:
        data, self._first = self._first or self._lines.read(size, line), b""
        self.kept.append(data)
        return data


def find_opening(path: Path, lines: Lines, declared: Format) -> Opening:
    """Read up to and including the first row, in a log up to the first row of its table.

    Raises
    ------
    DataFileError
        There is no row, no header as declared, or the header and the first row disagree.
    """
    if declared.table is None:
        remembering = _Remembering(lines)
        layout = find_layout(path, remembering, declared)
        return Opening(layout, _header(remembering.kept, layout), "", 0)
    table = declared.table
    line = skipped = 0
    while data := lines.read(0, line + 1):
        line += 1
        text = _collapsed(data.decode("utf-8", errors="replace"))
        if text == table:
            layout = find_layout(path, _Remembering(lines, data), declared)
            layout = dataclasses.replace(layout, first_line=layout.first_line + line - 1)
            if not layout.numeric[0]:
                raise refusal(
                    path,
                    "a table in a log must begin with a column of numbers, by which its rows are told from other lines.",
                    line=layout.first_line,
                )
            return Opening(layout, data.strip(), table, skipped)
        skipped += bool(text)
    raise refusal(
        path,
        f"a log must hold the header that format.table declares; none of its {line} lines is {table!r}. "
        "Copy the header from the file.",
    )


class Sections:
    """Cuts blocks of lines into stretches of rows, and counts the lines between them.

    Parameters
    ----------
    path : pathlib.Path
    opening : Opening
    ledger : FileLedger
        Gets the number of headers written again, of which one begins every section but the first, and of lines skipped.
    """

    def __init__(self, path: Path, opening: Opening, ledger: FileLedger) -> None:
        self._path = path
        self._opening = opening
        self._ledger = ledger
        self._foreign = False  # inside a table with other columns
        self._text_before: str | None = None  # the last line of text since the last row

    def pieces(self, block: Block) -> Iterator[Block]:
        """Stretches of lines that are rows, blank or comments, in order.

        Raises
        ------
        DataFileError
            Rows of a log may belong to the declared table or to another.
        """
        start, line = 0, block.first_line
        for begin, end, is_header in self._cuts(block.data):
            piece = Block(block.data[start:begin], line, block.data.count(b"\n", start, begin))
            yield from self._rows(piece)
            line += piece.line_ends + 1
            start = end
            if is_header:
                self._ledger.repeated_headers += 1
                self._foreign, self._text_before = False, None
            else:
                self._ledger.skipped_lines += 1
                self._text_before = _collapsed(block.data[begin:end].decode("utf-8", errors="replace"))
        yield from self._rows(Block(block.data[start:], line, block.data.count(b"\n", start)))

    def _cuts(self, data: bytes) -> Iterator[tuple[int, int, bool]]:
        """Begin and end of every line that is no row, and whether it is the header."""
        if not self._opening.table:
            yield from self._headers(data)
            return
        prefixes = self._opening.layout.comment_prefixes
        for found in _TEXT_LINE.finditer(data):
            text = _collapsed(found[0].decode("utf-8", errors="replace"))
            if text == self._opening.table:
                yield found.start(), found.end(), True
            elif text and not text.startswith(prefixes) and not self._may_be_row(text):
                yield found.start(), found.end(), False

    def _may_be_row(self, text: str) -> bool:
        words = text.split(" ")
        if not _GONE_WRONG.fullmatch(words[0]):
            return False
        return len(words) == len(self._opening.layout.names) or re.search("[0-9]", text) is not None

    def _headers(self, data: bytes) -> Iterator[tuple[int, int, bool]]:
        header = self._opening.header
        place = data.find(header) if header else -1
        while place >= 0:
            begin, end = data.rfind(b"\n", 0, place) + 1, data.find(b"\n", place) + 1
            if data[begin:end].strip() == header:
                yield begin, end, True
            place = data.find(header, max(end, place + 1))

    def _rows(self, piece: Block) -> Iterator[Block]:
        if not piece.data.strip():
            if piece.data:
                yield piece
            return
        if self._text_before is not None:
            self._judge(piece)
            self._text_before = None
        if self._foreign:
            self._ledger.skipped_lines += sum(1 for line in piece.data.split(b"\n") if line.strip())
        else:
            yield piece

    def _judge(self, piece: Block) -> None:
        """Whether numbers behind a line of text go on with the table or belong to another one."""
        layout, columns = self._opening.layout, len(self._opening.layout.names)
        place, row = next((place, line) for place, line in enumerate(piece.data.split(b"\n")) if line.strip())
        text = row.decode("utf-8", errors="replace")
        if text.strip().startswith(layout.comment_prefixes):
            return
        fields = len(split(text, layout.delimiter))
        if fields != columns:
            self._foreign = True
        elif self._foreign or len((self._text_before or "").split(" ")) == columns:
            raise refusal(
                self._path,
                f"rows of {columns} numbers must follow the header {self._opening.table!r}; these follow "
                f"{self._text_before!r}, so they may belong to another table of as many columns. Write the table into a "
                "file of its own.",
                line=piece.first_line + place,
            )


def _header(lines: deque[bytes], layout: Layout) -> bytes:
    """The line among those before the first row that holds the names, stripped."""
    if all(layout.number(name) is not None for name in layout.names):
        return b""  # a row might look the same
    wanted = _BETWEEN_NAMES.sub("", "".join(layout.names))
    for raw in list(lines)[-2::-1]:  # the last one is the row
        text = raw.decode("utf-8", errors="replace").strip()
        prefix = max((each for each in layout.comment_prefixes if text.startswith(each)), key=len, default="")
        if _BETWEEN_NAMES.sub("", text.removeprefix(prefix)) == wanted:
            return raw.strip()
    return b""


def _collapsed(text: str) -> str:
    return " ".join(text.split())
