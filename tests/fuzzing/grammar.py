"""Data files as a grammar: tables of numbers in every dress, with accidents in them, and bytes changed at random.

What is drawn is small, so that it can be shrunk to the fault; what matters is how it is dressed: header, comments,
delimiter, line ends, encoding, packing, format of NetCDF.
"""

from __future__ import annotations

import bz2
import functools
import gzip
import lzma
import tempfile
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import netCDF4
import numpy as np
from hypothesis import strategies as st

__all__ = ["Document", "documents", "netcdf", "sound_documents"]

NUMBERS = (
    "0", "1", "-1", "2512.33", "-2512.33", "1.5e+03", "-7.25E-02", ".5", "5.", "+3.5", "1e-320", "1e300",
    "  12.50", "0.1000000000000000055511151231257827", "123456789012345678901234567890", "007",
)  # fmt: skip
ACCIDENTS = (
    "nan", "NaN", "-nan", "inf", "-Infinity", "1e999", "-1e999", "*********", "restart", "", "-", ".", "1e",
    "0x1F", "0b101", "1_000", "1,000.5", "1.000,5", "1,5", "1.5D+03", "1.5d-3", "1.5Q0", "\u22123.5", "\u0663\u0664",
    "\uff11", "NA", "N/A", "null", "None", "True", "'5'", '"5"', "1.5#", "1.5 # why", "1.5.2", "--5", "+-5", "5-",
    "1 2", "\x00\x00", "\x1a", "\u00a05", "\u200b5", "\ufeff5", "(1,2)", "1+2j", "1e-400", "\x0b5", "5\x0c",
    "1/2", "50%", "9" * 400,
)  # fmt: skip
NAMES = ("step [ps]", "potential", "volume", "E_kin", "potential")
HEADERS = (
    "", "", "{names}", "# {names}", "# made by a program\n\n# {names}", "# {names}\n{names}", "; {names}\n@ title 'x'\n& ",
)  # fmt: skip
ODD_HEADERS = (
    "@TYPE xy", "\ufeff# {names}", "1 {names}", "# nan inf 1e999", "Restarted from step 5 of 9", "{names}\n{names}",
    "step potential volume", "\"a\";\"b\"", "=====\n{names}\n=====", "\u0395 \u03bd",
)  # fmt: skip
BETWEEN = (
    "",
    "   ",
    "\t",
    "# again",
    "step potential volume",
    "# step potential volume",
    "&",
    "----",
    ",,",
    ";;",
)
DELIMITERS = (" ", "  ", "\t", ",", ";", ", ", " ; ")
ODD_DELIMITERS = ("|", "\u00a0", " \t", "/", ":")
LINE_ENDS = ("\n", "\r\n", "\n\n")
ODD_LINE_ENDS = ("\r", "\n\r", "\x0b", "\u2028", " \n", "\\\n")
ODD_ENCODINGS = ("utf-8-sig", "latin-1", "utf-16", "utf-16-le", "utf-32")
PACKINGS: tuple[Callable[[bytes], bytes], ...] = (gzip.compress, bz2.compress, lzma.compress)
ODD_DECLARED: tuple[Mapping[str, Any], ...] = (
    {"decimal": ","}, {"decimal": ",", "delimiter": ";"}, {"encoding": "utf-16"}, {"encoding": "latin-1"},
    {"header": False}, {"header": True}, {"delimiter": ","}, {"delimiter": "tab"}, {"delimiter": "blanks"},
    {"comment": ["#", "@"]},
)  # fmt: skip
NETCDF_ROWS = 40
NETCDF_FORMATS = (
    "NETCDF4",
    "NETCDF4_CLASSIC",
    "NETCDF3_CLASSIC",
    "NETCDF3_64BIT_OFFSET",
    "NETCDF3_64BIT_DATA",
)


@dataclass(frozen=True)
class Document:
    """Bytes of a data file, what a study declares about it under ``[format]``, and the rows it holds if it is sound."""

    content: bytes
    declared: Mapping[str, Any]
    rows: Sequence[Sequence[float]] | None = None


def _seldom(draw: st.DrawFn) -> bool:
    return draw(st.integers(0, 7)) == 5


def _text(draw: st.DrawFn, *, accidents: bool) -> tuple[bytes, list[list[str]]]:
    columns, rows = draw(st.integers(1, 4)), draw(st.integers(0 if accidents else 1, 10))
    first = draw(st.integers(0, len(NUMBERS) - 1))
    cells = [
        [NUMBERS[(first + 3 * row + 5 * column) % len(NUMBERS)] for column in range(columns)]
        for row in range(rows)
    ]
    delimiter = draw(st.sampled_from(ODD_DELIMITERS if _seldom(draw) else DELIMITERS))
    end = draw(st.sampled_from(ODD_LINE_ENDS if _seldom(draw) else LINE_ENDS))
    if accidents and rows:
        for _ in range(draw(st.integers(0, 2))):
            row, column = draw(st.integers(0, rows - 1)), draw(st.integers(0, columns - 1))
            if draw(st.booleans()):
                cells[row][min(column, len(cells[row]) - 1)] = draw(st.sampled_from(ACCIDENTS))
            elif draw(st.booleans()):
                cells[row].append(draw(st.sampled_from((*NUMBERS, *ACCIDENTS))))
            elif len(cells[row]) > 1:
                del cells[row][column % len(cells[row])]
    lines = [delimiter.join(row) for row in cells]
    if accidents and lines and draw(st.booleans()):
        lines.insert(draw(st.integers(0, len(lines))), draw(st.sampled_from(BETWEEN)))
    if accidents and _seldom(draw):
        lines = [f"{line}{delimiter}" for line in lines]
    header = draw(st.sampled_from(ODD_HEADERS if _seldom(draw) else HEADERS))
    if header:
        lines = [*header.format(names=delimiter.join(NAMES[:columns])).split("\n"), *lines]
    text = end.join(lines) + (end if not accidents or not _seldom(draw) else "")
    encoding = draw(st.sampled_from(ODD_ENCODINGS)) if _seldom(draw) else "utf-8"
    return text.encode(encoding, errors="replace"), cells


def _declared(draw: st.DrawFn) -> Mapping[str, Any]:
    return draw(st.sampled_from(ODD_DECLARED)) if _seldom(draw) else {}


@functools.cache
def netcdf(form: str, *, unlimited: bool, packed: bool) -> bytes:
    """Bytes of a small sound NetCDF file."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "seed.nc"
        with netCDF4.Dataset(path, "w", format=form) as dataset:
            dataset.title = "seed"
            dataset.createDimension("sample", None if unlimited else NETCDF_ROWS)
            deflated = {"zlib": True} if packed and form.startswith("NETCDF4") else {}
            for name, kind in (("energy", "f8"), ("volume", "f4"), ("step", "i4")):
                variable = dataset.createVariable(name, kind, ("sample",), **deflated)
                variable[:] = np.arange(NETCDF_ROWS) * 1.25
        return path.read_bytes()


def _mutated(draw: st.DrawFn, content: bytes) -> bytes:
    """Change a few bytes: flips, cuts, repeats, zeros, foreign bytes."""
    data = bytearray(content)
    for _ in range(draw(st.integers(0, 3))):
        if not data:
            break
        kind = draw(st.sampled_from(("flip", "set", "cut", "repeat", "zeros", "insert", "truncate")))
        place = draw(st.integers(0, len(data) - 1))
        length = draw(st.integers(1, 16))
        if kind == "flip":
            data[place] ^= 1 << draw(st.integers(0, 7))
        elif kind == "set":
            data[place] = draw(st.integers(0, 255))
        elif kind == "cut":
            del data[place : place + length]
        elif kind == "repeat":
            data[place:place] = data[place : place + length]
        elif kind == "zeros":
            data[place : place + length] = bytes(length)
        elif kind == "insert":
            data[place:place] = draw(st.binary(min_size=1, max_size=8))
        else:
            del data[place:]
    return bytes(data)


@st.composite
def documents(draw: st.DrawFn) -> Document:
    """Files with accidents, in text or in NetCDF, with bytes changed before and after packing."""
    declared = _declared(draw)
    if _seldom(draw):
        seed = netcdf(
            draw(st.sampled_from(NETCDF_FORMATS)), unlimited=draw(st.booleans()), packed=draw(st.booleans())
        )
        return Document(_mutated(draw, seed), declared)
    content, _ = _text(draw, accidents=True)
    if _seldom(draw):
        content = _mutated(draw, content)
    if _seldom(draw):
        content = draw(st.sampled_from(PACKINGS))(content)
        if draw(st.booleans()):
            content = _mutated(draw, content)
    return Document(content, declared)


@st.composite
def sound_documents(draw: st.DrawFn) -> Document:
    """Files without accidents; most of them can be read, and cut anywhere they must not be misread."""
    if _seldom(draw):
        seed = netcdf(
            draw(st.sampled_from(NETCDF_FORMATS)), unlimited=draw(st.booleans()), packed=draw(st.booleans())
        )
        return Document(seed, {}, [[1.25 * row, 1.25 * row, int(1.25 * row)] for row in range(NETCDF_ROWS)])
    content, cells = _text(draw, accidents=False)
    if _seldom(draw):
        content = draw(st.sampled_from(PACKINGS))(content)
    declared = _declared(draw)
    rows = None if declared else [[float(cell) for cell in row] for row in cells]
    return Document(content, declared, rows)
