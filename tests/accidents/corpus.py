"""Small accident files, each with its one defined outcome.

The table in ``reweight/guide/accidents.md`` is made of this list (``python tests/accidents/corpus.py``, which then sends
every case through the installed command), and a test compares the two: what the documentation promises is what the tests
hold the program to.

Every case starts from a sound study of two runs, ``cold.dat`` and ``hot.dat``, and spoils one thing.
"""

from __future__ import annotations

import bz2
import gzip
import lzma
import os
import re
import struct
import subprocess
import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from tempfile import TemporaryDirectory

import netCDF4
import numpy as np

__all__ = ["ACCIDENTS", "FILE_NAMES", "GUIDE_PAGE", "Accident", "broken_promise", "guide_page", "make_study"]

ROWS = 600
GUIDE_PAGE = Path(__file__).parents[2] / "reweight" / "guide" / "accidents.md"
STUDY = """\
schema = 1
title = "Twenty oscillators"
energy_unit = "kJ/mol"

[columns]
energy = "potential"

[[run]]
name = "cold"
temperature = 300.0
files = ["cold.dat"]

[[run]]
name = "hot"
temperature = 330.0
files = ["hot.dat"]
"""

GUIDE_HEAD = """\
# accidents

What becomes of damaged and strange data files: each accident has one outcome, and none that would change a number is read in silence. "Refused" ends with status 2 and a message with the file, the line or row where there is one, what was found and what to do; nothing is written. "Read" means that the rows count; what was skipped is counted in the summary of `combine` and in the [ledger](ledger.md).

"""  # noqa: E501  # a paragraph is one line, as in every page of the guide
GUIDE_TAIL = """
Names of files are data: blanks, quotes, dashes, dollar signs, line ends and marks that turn the direction of writing around have no meaning, and whatever a terminal would not show as itself is shown as an escape (`\\n`, `\\u202e`). A name that begins with a dash is given on a command line as `./-name`.

Outputs are written beside their final name and renamed: the old file or the whole new one is there, never a part. Ctrl-C leaves nothing behind. A full disk and a folder that cannot be written are one message each. A file of the study is never replaced, not even with `--force`.
"""  # noqa: E501  # as above

Spoil = Callable[[Path], object]


@dataclass(frozen=True)
class Accident:
    """What happened to a file, and what the program does about it.

    Attributes
    ----------
    what : str
        The accident, in the words of the table.
    outcome : str
        What is promised: begins with "refused" or with "read".
    spoil : callable
        Does the damage in the folder of the study.
    shows : str
        Regular expression: in the refusal it finds place, finding and advice, in the summary the count.
    """

    what: str
    outcome: str
    spoil: Spoil
    shows: str


def make_study(folder: Path) -> Path:
    """Write the sound study; energies in kJ/mol of twenty oscillators, thirty quadratic terms of potential energy."""
    rng = np.random.default_rng(20261201)
    for name, temperature in (("cold", 300.0), ("hot", 330.0)):
        energies = rng.gamma(30.0, 8.31446261815324e-3 * temperature, ROWS)
        lines = [f"{step} {energy:.4f} {rng.random():.3f}\n" for step, energy in enumerate(energies)]
        (folder / f"{name}.dat").write_text("# step potential[kJ/mol] volume\n" + "".join(lines))
    path = folder / "study.toml"
    path.write_text(STUDY)
    return path


def _line(number: int, text: str) -> Spoil:
    """Put a text in place of a line; its end is part of the text."""

    def spoil(folder: Path) -> None:
        lines = (folder / "cold.dat").read_bytes().splitlines(keepends=True)
        lines[number - 1] = text.encode()
        (folder / "cold.dat").write_bytes(b"".join(lines))

    return spoil


def _inserted(number: int, text: str) -> Spoil:
    def spoil(folder: Path) -> None:
        lines = (folder / "cold.dat").read_bytes().splitlines(keepends=True)
        (folder / "cold.dat").write_bytes(
            b"".join([*lines[: number - 1], text.encode(), *lines[number - 1 :]])
        )

    return spoil


def _field(text: str, column: int = 1) -> Spoil:
    """Put a text in place of a field of line 12."""

    def spoil(folder: Path) -> None:
        fields = (folder / "cold.dat").read_text().splitlines()[11].split()
        fields[column] = text
        _line(12, " ".join(fields) + "\n")(folder)

    return spoil


def _bytes(change: Callable[[bytes], bytes]) -> Spoil:
    return lambda folder: (folder / "cold.dat").write_bytes(change((folder / "cold.dat").read_bytes()))


def _content(content: bytes) -> Spoil:
    return lambda folder: (folder / "cold.dat").write_bytes(content)


def _declared(*lines: str, then: Spoil = lambda folder: None, columns: str = "") -> Spoil:
    """Write lines into the study before ``[columns]``, and ``columns`` into that table."""

    def spoil(folder: Path) -> None:
        path = folder / "study.toml"
        text = path.read_text().replace(
            "[columns]\n", "".join(f"{line}\n" for line in lines) + "[columns]\n" + columns
        )
        path.write_text(text)
        then(folder)

    return spoil


def _energy(column: str, then: Spoil = lambda folder: None) -> Spoil:
    def spoil(folder: Path) -> None:
        path = folder / "study.toml"
        path.write_text(path.read_text().replace('energy = "potential"', f"energy = {column}"))
        then(folder)

    return spoil


CLOCK = 'time = "step"\ntime_unit = "ps"\n'


def _clock(change: Callable[[np.ndarray], np.ndarray]) -> Spoil:
    """Give the study a clock, and that clock other times."""

    def spoil(folder: Path) -> None:
        rows = np.loadtxt(folder / "cold.dat")
        rows[:, 0] = change(rows[:, 0])
        np.savetxt(folder / "cold.dat", rows, fmt=["%.10g", "%.4f", "%.3f"], header="step potential volume")

    return _declared(columns=CLOCK, then=spoil)


def _shuffled(times: np.ndarray) -> np.ndarray:
    times[[20, 40]] = times[[40, 20]]
    return times


def _frozen(times: np.ndarray) -> np.ndarray:
    times[100:] = times[100]
    return times


def _gap(times: np.ndarray) -> np.ndarray:
    times[300:] += 7
    return times


def _netcdf(
    form: str,
    change: Callable[[bytes], bytes] = bytes,
    *,
    values: np.ndarray | None = None,
    **options: object,
) -> Spoil:
    """Make the cold run a NetCDF file under its old name."""

    def spoil(folder: Path) -> None:
        path = folder / "cold.dat"
        energies = np.loadtxt(path)[:, 1] if values is None else values
        path.unlink()
        with netCDF4.Dataset(path, "w", format=form) as dataset:
            dataset.createDimension("sample", energies.size)
            variable = dataset.createVariable("potential", "f8", ("sample",), **options)
            variable[:] = np.ma.masked_invalid(energies)
        path.write_bytes(change(path.read_bytes()))

    return spoil


def _huge_netcdf(folder: Path) -> None:
    (folder / "cold.dat").unlink()
    with netCDF4.Dataset(folder / "cold.dat", "w") as dataset:
        dataset.createDimension("sample", 10**12)
        dataset.createVariable("potential", "f8", ("sample",), chunksizes=(1000,))


def _huge_classic(folder: Path) -> None:
    """A classic header that declares 4 GB in some 100 bytes."""
    dimension = (
        struct.pack(">II", 10, 1) + struct.pack(">I", 6) + b"sample\0\0" + struct.pack(">I", 500_000_000)
    )
    variable = struct.pack(">III", 11, 1, 9) + b"potential\0\0\0" + struct.pack(">II", 1, 0)
    variable += struct.pack(">IIIII", 0, 0, 6, 4_000_000_000, 120)
    _content(b"CDF\x01" + struct.pack(">I", 0) + dimension + struct.pack(">II", 0, 0) + variable)(folder)


def _masked(position: int) -> np.ndarray:
    energies = np.linspace(60.0, 90.0, ROWS)
    energies[position] = np.nan
    return energies


def _pipe(folder: Path) -> None:
    (folder / "cold.dat").unlink()
    os.mkfifo(folder / "cold.dat")


def _folder(folder: Path) -> None:
    (folder / "cold.dat").unlink()
    (folder / "cold.dat").mkdir()


def _link(target: str) -> Spoil:
    def spoil(folder: Path) -> None:
        (folder / "cold.dat").unlink()
        (folder / "cold.dat").symlink_to(target)

    return spoil


def _names(names: str) -> Spoil:
    return _line(1, f"# {names}\n")


def _map_rows(change: Callable[[str], str]) -> Spoil:
    def spoil(folder: Path) -> None:
        header, *rows = (folder / "cold.dat").read_text().splitlines()
        (folder / "cold.dat").write_bytes("".join([f"{header}\n", *(change(row) for row in rows)]).encode())

    return spoil


def _head(count: int) -> Spoil:
    return _bytes(lambda data: b"".join(data.splitlines(keepends=True)[:count]))


def _plain_header(then: Spoil) -> Spoil:
    """Write the header without a comment sign first."""

    def spoil(folder: Path) -> None:
        _line(1, "step potential volume\n")(folder)
        then(folder)

    return spoil


def _constant(folder: Path) -> None:
    _map_rows(lambda row: f"{row.split()[0]} 75.0 1.0\n")(folder)


NUMBER = r"cold\.dat, line 12: column 'potential\[kJ/mol\]' must hold "

ACCIDENTS: dict[str, tuple[Accident, ...]] = {
    "Numbers": (
        Accident("`nan`", "refused with its line", _field("nan"), NUMBER + "finite numbers; got 'nan'"),
        Accident("`inf`", "refused with its line", _field("-inf"), NUMBER + "finite numbers; got '-inf'"),
        Accident(
            "overflow (`1e999`)", "refused with its line", _field("1e999"), NUMBER + r"numbers below .*1e999"
        ),
        Accident(
            "stars (`*******`)", "refused with its line", _field("*******"), NUMBER + r".*\*'\. Stars are"
        ),
        Accident("a word (`restart`)", "refused with its line", _field("restart"), NUMBER + ".*'restart'"),
        Accident(
            "a word for a missing value (`NA`)", "refused with its line", _field("NA"), NUMBER + ".*'NA'"
        ),
        Accident(
            "an empty field (`3,,5`)",
            "refused with its line",
            _map_rows(lambda row: ",".join(row.split()) + "\n" if not row.startswith("10 ") else "10,,0.5\n"),
            r"line 12.*An empty field is no number",
        ),
        Accident(
            "a fill value of text files (`-999.0`)",
            "read, and a finding counts the samples far from all others",
            _field("-999.0"),
            r"caution: cold has 1 sample more than 20 interquartile.*near -99[0-9.]+; delete rows that hold fill values",
        ),
        Accident(
            "a fill value of NetCDF (`9.96921e+36`)",
            "refused with its run",
            _field("9.96921e+36"),
            r"run 'cold': energies must be smaller than .*9\.96921e\+36.*look for fill values",
        ),
        Accident(
            "an absurd magnitude (`1e300`)",
            "refused with its run",
            _field("1e300"),
            r"energies must be smaller than 1e\+60; got 1e\+300 \(run 1 of 2\)\. Check the unit",
        ),
        Accident(
            "a wild first sample (`1e6`)",
            "read, and counted as transient",
            _line(2, "0 1e6 0.5\n"),
            r"cold +300 +600 +[1-9]",
        ),
        Accident(
            "a fill value among the energies (`0`)",
            "read: nothing tells it from an energy",
            _field("0.0"),
            "1,200 rows read",
        ),
        Accident(
            "a hexadecimal number (`0x1F`)", "refused with its line", _field("0x1F"), NUMBER + ".*'0x1F'"
        ),
        Accident("an underscore (`1_000`)", "refused with its line", _field("1_000"), NUMBER + ".*'1_000'"),
        Accident("digits of another script", "refused with its line", _field("\u0667\u0665"), NUMBER),
        Accident("a typographic minus sign", "refused with its line", _field("\u221275.5"), NUMBER),
        Accident("a no-break space inside a number", "refused with its line", _field("75\u00a0100"), NUMBER),
        Accident("a complex number (`1+2j`)", "refused with its line", _field("1+2j"), NUMBER),
        Accident("two decimal points (`1.5.2`)", "refused with its line", _field("1.5.2"), NUMBER),
        Accident(
            "numbers that ran together (`-75.1-12.3`)", "refused with its line", _field("-75.1-12.3"), NUMBER
        ),
        Accident(
            "an exponent without its letter (`1.5+103`)", "refused with its line", _field("1.5+103"), NUMBER
        ),
        Accident(
            "decimal commas, not declared",
            "refused with its line",
            _field("75,25"),
            NUMBER + ".*decimal comma",
        ),
        Accident(
            "thousands separators, not declared",
            "refused with its line",
            _field("1,075.25"),
            "cold.dat, line 12",
        ),
        Accident("Fortran exponents (`7.5D+01`)", "read", _field("7.5D+01"), "1,200 rows read"),
    ),
    "Rows": (
        Accident(
            "a short row",
            "refused with its line",
            _line(12, "10 75.0\n"),
            r"cold\.dat, line 12: rows must have 3 columns.*got 2.*correct or delete",
        ),
        Accident(
            "a long row",
            "refused with its line",
            _line(12, "10 75.0 1.0 2.0\n"),
            r"cold\.dat, line 12: rows must have 3 columns.*got 4",
        ),
        Accident(
            "two rows in one line",
            "refused with its line",
            _line(12, "10 75.0 0.1 11 76.0 0.2\n"),
            r"line 12: rows must have 3 columns.*got 6",
        ),
        Accident(
            "a comment after the numbers",
            "refused with its line",
            _line(12, "10 75.0 0.1 # restarted\n"),
            r"line 12: rows must have 3",
        ),
        Accident(
            "a trailing delimiter in one row",
            "refused with its line",
            _map_rows(lambda row: ",".join(row.split()) + (",\n" if row.startswith("10 ") else "\n")),
            r"line 12: rows must have 3 columns",
        ),
        Accident(
            "a trailing delimiter in every row",
            "refused: one name is missing",
            _map_rows(lambda row: ",".join(row.split()) + ",\n"),
            r"cold\.dat: columns\.energy must be a column.*4: '4'",
        ),
        Accident(
            "blank lines",
            "read; they are no rows, and are counted",
            _inserted(12, "\n  \n\t\n"),
            r"1,200 rows read.*cold\.dat: 3 blank lines skipped",
        ),
        Accident(
            "comment lines between the rows",
            "read: they are no rows",
            _inserted(12, "# restarted\n"),
            "1,200 rows read",
        ),
        Accident(
            "the header again",
            "read; counted",
            _plain_header(_inserted(12, "step potential volume\n")),
            r"1,200 rows read.*cold\.dat: 1 more header inside the file",
        ),
        Accident(
            "another header",
            "refused with its line",
            _plain_header(_inserted(12, "step volume potential\n")),
            r"cold\.dat, line 12: ",
        ),
        Accident(
            "other text between the rows",
            "refused with its line",
            _inserted(12, "Restarting now\n"),
            r"line 12: rows must have 3 columns.*got 2 in 'Restarting now'.*correct or delete",
        ),
        Accident(
            "NUL bytes (a crash of the file system)",
            "refused with its line",
            _line(12, "\0" * 20 + "\n"),
            r"cold\.dat, line 12: text must not hold NUL bytes",
        ),
        Accident(
            "a very long line",
            "refused with its line",
            _line(12, "9 " * 600_000 + "\n"),
            r"line 12: rows must have 3 columns.*got 600000 in",
        ),
        Accident(
            "a line without end",
            "refused before it is held as a whole",
            _content(b"# step potential volume\n1 2 3\n" + b"9 " * 3_000_000),
            r"cold\.dat, line 3: lines must not be longer than 1000000 bytes",
        ),
        Accident(
            "thousands of columns",
            "refused; a cap that can be raised",
            _content(b" ".join([b"1"] * 20_000) + b"\n"),
            r"line 1: rows must have at most 10000 columns; got 20000.*raise most_columns",
        ),
        Accident(
            "mixed line ends",
            "read: both end a line",
            _bytes(lambda data: data.replace(b"\n", b"\r\n", 300)),
            "1,200 rows read",
        ),
        Accident(
            "Windows line ends", "read", _bytes(lambda data: data.replace(b"\n", b"\r\n")), "1,200 rows read"
        ),
        Accident(
            "carriage returns alone",
            "refused, with what to do",
            _bytes(lambda data: data.replace(b"\n", b"\r")),
            r"cold\.dat, line 1: lines must end with a line feed",
        ),
    ),
    "Ends of files": (
        Accident(
            "the last row cut short",
            "refused with its line",
            _bytes(lambda data: data[:-12]),
            r"cold\.dat, line 601: the last line must end with a line end.*cut short.*add a line end",
        ),
        Accident(
            "the last number cut short (`-25` from `-2512.33`)",
            "refused with its line",
            _bytes(lambda data: data[:-3]),
            r"cold\.dat, line 601: .*last number may be cut short",
        ),
        Accident(
            "no line end after the last row",
            "refused with its line",
            _bytes(lambda data: data[:-1]),
            r"cold\.dat, line 601: .*add a line end",
        ),
        Accident(
            "cut short just after a line end",
            "read: the count of rows in the summary is all that shows it",
            _head(500),
            "1,099 rows read",
        ),
        Accident(
            "truncated gzip",
            "refused",
            _bytes(lambda data: gzip.compress(data)[:-200]),
            r"cold\.dat: compressed file must be complete; it ends too early\. Copy",
        ),
        Accident(
            "gzip with its last bytes missing",
            "refused",
            _bytes(lambda data: gzip.compress(data)[:-3]),
            r"cold\.dat: compressed file must be complete",
        ),
        Accident(
            "damaged gzip",
            "refused",
            _bytes(lambda data: (packed := gzip.compress(data))[:400] + bytes(8) + packed[408:]),
            r"cold\.dat: compressed file must be (undamaged|complete)",
        ),
        Accident(
            "bytes after the end of gzip",
            "refused",
            _bytes(lambda data: gzip.compress(data) + b"garbage"),
            r"cold\.dat: compressed file must be undamaged",
        ),
        Accident("truncated bz2", "refused", _bytes(lambda data: bz2.compress(data)[:-20]), r"cold\.dat.*"),
        Accident("truncated xz", "refused", _bytes(lambda data: lzma.compress(data)[:-20]), r"cold\.dat.*"),
        Accident(
            "truncated NetCDF-4",
            "refused",
            _netcdf("NETCDF4", lambda data: data[:-500]),
            r"cold\.dat: file must be a complete NetCDF file.*Copy it again",
        ),
        Accident(
            "truncated classic NetCDF (would read as zeros)",
            "refused: it is shorter than its header says",
            _netcdf("NETCDF3_CLASSIC", lambda data: data[:-800]),
            r"cold\.dat: file must be as long as its header says.*Copy it again",
        ),
        Accident(
            "truncated NetCDF of 64-bit offsets",
            "refused: it is shorter than its header says",
            _netcdf("NETCDF3_64BIT_OFFSET", lambda data: data[:-8]),
            r"as long as its header says",
        ),
        Accident(
            "truncated NetCDF of 64-bit data",
            "refused: it is shorter than its header says",
            _netcdf("NETCDF3_64BIT_DATA", lambda data: data[:-8]),
            r"as long as its header says",
        ),
    ),
    "Whole files": (
        Accident(
            "no such file",
            "refused",
            lambda folder: (folder / "cold.dat").unlink(),
            r"cold\.dat.*No such file",
        ),
        Accident(
            "an empty file",
            "refused",
            _content(b""),
            r"cold\.dat: data file must hold rows.*empty\. Leave it out",
        ),
        Accident("a header and no rows", "refused", _head(1), r"cold\.dat: data file must hold rows"),
        Accident(
            "blank lines and nothing else",
            "refused",
            _content(b"\n\n\n"),
            r"cold\.dat: data file must hold rows",
        ),
        Accident("one sample", "refused", _head(2), r"cold.*"),
        Accident(
            "all samples equal",
            "refused: nothing links it to the other runs",
            _constant,
            r"all runs must share energies.*\[cold\]; \[hot\].*Add runs near",
        ),
        Accident("binary under a text name", "refused", _content(bytes(range(256)) * 40), r"cold\.dat.*"),
        Accident(
            "a picture under a text name",
            "refused",
            _content(b"\x89PNG\r\n\x1a\n" + bytes(200)),
            r"cold\.dat.*must be a column of the file",
        ),
        Accident(
            "a zip archive under a text name",
            "refused",
            _content(b"PK\x03\x04\x14" + bytes(range(1, 200)) * 30),
            r"cold\.dat.*",
        ),
        Accident(
            "a folder",
            "refused",
            _folder,
            r"cold\.dat: data must be in a plain file; got a folder\. Name a file",
        ),
        Accident(
            "a device (`/dev/zero`)",
            "refused",
            _link("/dev/zero"),
            r"cold\.dat: data must be in a plain file; got .*device",
        ),
        Accident(
            "a pipe",
            "refused; it is not waited for",
            _pipe,
            r"cold\.dat: data must be in a plain file; got a pipe",
        ),
        Accident("a link to itself", "refused", _link("cold.dat"), r"cold\.dat.*[Ss]ymbolic links"),
        Accident("a link to nothing", "refused", _link("gone.dat"), r"cold\.dat.*No such file"),
        Accident("a byte-order mark", "read", _bytes(lambda data: b"\xef\xbb\xbf" + data), "1,200 rows read"),
        Accident(
            "UTF-16 with a byte-order mark",
            "read",
            _bytes(lambda data: data.decode().encode("utf-16")),
            "1,200 rows read",
        ),
        Accident(
            "UTF-16 without a byte-order mark",
            "refused, with what to declare",
            _bytes(lambda data: data.decode().encode("utf-16-le")),
            r"cold\.dat, line 1: text must not hold NUL bytes.*encoding = .utf-16",
        ),
        Accident(
            "a gzip file of zeros that unpacks to gigabytes",
            "refused before it is unpacked",
            _content(gzip.compress(bytes(1 << 27))),
            r"cold\.dat, line 1: lines must not be longer than 1000000 bytes",
        ),
        Accident(
            "a gzip file of blank lines that unpacks to gigabytes",
            "refused; a cap that can be raised",
            _content(
                gzip.compress(b"# step potential volume\n1 2 3\n") + gzip.compress(b"\n" * (1 << 26)) * 5
            ),
            r"cold\.dat: .*(unpack|expan)",
        ),
    ),
    "Columns": (
        Accident(
            "a column that is not there",
            "refused with the names there are",
            _energy('"enthalpy"'),
            r"cold\.dat: columns\.energy must be a column.*'enthalpy'.*Columns are 1: 'step'",
        ),
        Accident(
            "a position beyond the last column",
            "refused with the names there are",
            _energy("9"),
            r"must be one of the 3 columns; got 9",
        ),
        Accident(
            "two columns of one name",
            "refused if it is asked for",
            _names("step potential potential"),
            r"must name one column.*columns 2, 3\. Use a position",
        ),
        Accident(
            "a name too few in the header",
            "refused with the names there are",
            _names("step potential"),
            r"columns\.energy must be a column of the file.*1: '1'",
        ),
        Accident(
            "columns in another order in the second file",
            "read by name",
            _names("volume potential step"),
            "1,200 rows read",
        ),
    ),
    "Times (a clock is declared)": (
        Accident(
            "shuffled", "refused with the row", _clock(_shuffled), r"cold\.dat, row \d+: times must rise"
        ),
        Accident(
            "frozen",
            "refused with the row",
            _clock(_frozen),
            r"cold\.dat, row 102: times must rise from row to row",
        ),
        Accident(
            "backward",
            "refused with the row",
            _clock(lambda times: times[::-1]),
            r"cold\.dat, row 2: times must rise from row to row",
        ),
        Accident(
            "a gap",
            "refused with the row",
            _clock(_gap),
            r"cold\.dat, row 301: times must rise in equal steps; got 307 after 299",
        ),
    ),
    "NetCDF": (
        Accident(
            "a fill value",
            "refused with its row",
            _netcdf("NETCDF4", values=_masked(7)),
            r"cold\.dat, row 8: variable 'potential' must hold finite numbers; got a missing value",
        ),
        Accident(
            "`nan` without a fill value",
            "refused with its row",
            _netcdf("NETCDF4", values=_masked(7), fill_value=np.nan),
            r"cold\.dat, row 8: ",
        ),
        Accident(
            "terabytes declared in a small file",
            "refused before anything is allocated",
            _huge_netcdf,
            r"cold\.dat: variable 'potential' must fit the file; it declares",
        ),
        Accident(
            "gigabytes declared in a classic header",
            "refused before anything is allocated",
            _huge_classic,
            r"as long as its header says",
        ),
        Accident(
            "no variable with one dimension",
            "refused",
            _netcdf("NETCDF4", values=np.empty(0)),
            r"cold\.dat: .*must hold rows",
        ),
    ),
}
FILE_NAMES = (
    "-dash.dat", "--force", "two words.dat", "$(touch owned).dat", "`touch owned`", "a;b&c|d.dat", "quote'\".dat",
    "new\nline.dat", "right\u202eto left.dat", "\x1b[31mred.dat",
    "\u0395\u03bd\u03ad\u03c1\u03b3\u03b5\u03b9\u03b1.dat", "<b>bold.dat", "%s%n.dat",
    "~", "tab\there.dat",
)  # fmt: skip


def broken_promise(case: Accident, status: int, stdout: str, stderr: str, *, wrote: bool) -> str:
    """What is not as promised in the outcome of ``reweight combine``; empty if all is."""
    if "Traceback" in stderr:
        return "a traceback"
    if case.outcome.startswith("refused"):
        if status != 2 or stdout or wrote:
            return f"not simply refused: status {status}, files written: {wrote}, printed {stdout!r}"
        return "" if re.search(case.shows, stderr, re.DOTALL) else f"the refusal does not say it: {stderr}"
    if not case.outcome.startswith("read") or status not in (0, 3):
        return f"not read: status {status}, {stderr}"
    return "" if re.search(case.shows, stdout, re.DOTALL) else f"the summary does not say it: {stdout}"


def through_the_installed_command() -> int:
    """Every accident by ``reweight combine`` in a process of its own; prints and counts broken promises."""
    cases = [each for group in ACCIDENTS.values() for each in group]
    broken = 0
    for case in cases:
        with TemporaryDirectory() as name:
            study = make_study(Path(name))
            case.spoil(study.parent)
            before = sorted(study.parent.iterdir())
            program = Path(sys.executable).with_name("reweight")
            done = subprocess.run(
                [program, "combine", study], capture_output=True, text=True, check=False, timeout=120
            )
            wrote = sorted(study.parent.iterdir()) != before
            told = broken_promise(case, done.returncode, done.stdout, done.stderr, wrote=wrote)
        if told:
            broken += 1
            print(f"{case.what}: {told}")
    print(f"{len(cases)} accidents through the installed command, {broken} broken promises")
    return broken


def guide_page() -> str:
    """The page of the user documentation."""
    parts = [GUIDE_HEAD]
    for title, cases in ACCIDENTS.items():
        rows = "\n".join(f"| {each.what.replace('|', chr(92) + '|')} | {each.outcome} |" for each in cases)
        parts.append(f"**{title}**\n\n| accident | outcome |\n| --- | --- |\n{rows}\n")
    return "\n".join(parts) + GUIDE_TAIL


if __name__ == "__main__":
    GUIDE_PAGE.write_text(guide_page(), "utf-8")
    sys.exit(bool(through_the_installed_command()))
