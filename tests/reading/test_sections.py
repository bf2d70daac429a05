"""Tables of numbers between the other lines of a log: only what the declared header heads is read, the rest is counted."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from reweight.errors import DataFileError
from reweight.reading import FileLedger
from reweight.reading.text import TextTable
from reweight.study import Format

HEADER = "Step Temp Energy"
LOG = """\
Simulation of forty beads, started at 12:00
Reading 3 files
----------------------------------
100 200 300
Minimising
Step Energy
0 -1.5
1 -1.75
Step Temp Energy
0 300.1 -10.5
10 299.5 -11

WARNING: the list of neighbours was too short
20 301 -12
Loop time of 20.5 on 4 processes
* * * * * *
nothing more
Step  Temp  Energy
30 300 -13
Total wall time: 0:01:00
"""
ROWS = [[0, -10.5], [10, -11], [20, -12], [30, -13]]


def rows_of(
    folder: Path, content: str, block_size: int = 1 << 20, header: str = HEADER
) -> tuple[list, FileLedger]:
    (folder / "log").write_text(content)
    table = TextTable(folder / "log", Format(table=header), block_size=block_size)
    assert table.names == tuple(header.split())
    ledger = FileLedger("log")
    return np.concatenate(list(table.chunks([0, 2], ledger))).tolist(), ledger


@pytest.mark.parametrize("block_size", [1, 30, 100, 1 << 20])
def test_only_rows_behind_the_declared_header_are_read(tmp_path: Path, block_size: int) -> None:
    rows, ledger = rows_of(tmp_path, LOG, block_size)

    assert rows == ROWS
    # before: 4 lines of text, a row of numbers, another table of 2 rows and its header; then 4 and 1 lines of text
    assert (ledger.rows_read, ledger.skipped_lines, ledger.repeated_headers) == (4, 13, 1)
    assert ledger.blank_lines == 1


def test_blanks_in_the_declared_header_do_not_matter(tmp_path: Path) -> None:
    assert rows_of(tmp_path, LOG, header=" Step  Temp\tEnergy ")[0] == ROWS


@pytest.mark.parametrize("block_size", [16, 1 << 20])
@pytest.mark.parametrize(
    ("damage", "message"),
    [
        ("40 300\n", "line 21: rows must have 3 columns"),
        ("40 **** -14\n", "line 21: column 'Temp' must hold finite numbers"),
        ("nan 300 -14\n", "line 21: column 'Step' must hold finite numbers"),
        ("**** **** ****\n", "line 21: column 'Step' must hold finite numbers.*Stars"),
        ("40 300 -1", "the last line must end with a line end"),
    ],
)
def test_damaged_rows_are_refused_and_not_taken_for_text(
    tmp_path: Path, damage: str, message: str, block_size: int
) -> None:
    damaged = LOG.replace("Total wall", f"40 300 -14\n{damage}Total wall") if damage.endswith("\n") else None
    content = damaged or LOG.removesuffix("Total wall time: 0:01:00\n") + damage

    (tmp_path / "log").write_text(content)
    table = TextTable(tmp_path / "log", Format(table=HEADER), block_size=block_size)

    with pytest.raises(DataFileError, match=message):
        list(table.chunks([0, 1, 2], FileLedger("log")))


def test_another_table_with_fewer_columns_is_skipped(tmp_path: Path) -> None:
    rows, ledger = rows_of(tmp_path, LOG + "Step Energy\n1 2\n3 4\nStep Temp Energy\n40 1 -14\n")

    assert rows == [*ROWS, [40, -14]]
    assert ledger.skipped_lines == 13 + 3


def test_another_table_with_as_many_columns_is_refused(tmp_path: Path) -> None:
    with pytest.raises(
        DataFileError,
        match=r"line 22: rows of 3 numbers must follow the header .*these follow 'Step Volume Pressure'",
    ):
        rows_of(tmp_path, LOG + "Step Volume Pressure\n1 2 3\n")


def test_a_log_without_the_header_is_refused(tmp_path: Path) -> None:
    (tmp_path / "log").write_text(LOG)

    with pytest.raises(DataFileError, match=r"a log must hold the header.*none of its 20 lines is 'Step E'"):
        TextTable(tmp_path / "log", Format(table="Step E"))


def test_a_table_that_begins_with_words_is_refused(tmp_path: Path) -> None:
    (tmp_path / "log").write_text("kind E\nmove 1\nmove 2\n")

    with pytest.raises(DataFileError, match="must begin with a column of numbers"):
        TextTable(tmp_path / "log", Format(table="kind E"))


def test_lines_between_rows_are_refused_unless_a_table_is_declared(tmp_path: Path) -> None:
    (tmp_path / "log").write_text("Step Energy\n1 2\nLoop time\n3 4\n")
    table = TextTable(tmp_path / "log", Format())

    with pytest.raises(DataFileError, match="line 3: column 'Step' must hold finite numbers; got 'Loop'"):
        list(table.chunks([0, 1], FileLedger("log")))


def test_a_row_of_numbers_is_never_a_header(tmp_path: Path) -> None:
    (tmp_path / "a").write_text("1 2\n1 2\n1 2\n")
    ledger = FileLedger("a")

    (rows,) = TextTable(tmp_path / "a", Format()).chunks([0, 1], ledger)

    assert len(rows) == 3
    assert ledger.repeated_headers == 0


def test_a_header_of_numbers_is_not_found_again_among_the_rows(tmp_path: Path) -> None:
    (tmp_path / "a").write_text("0.5 1.5\n0.5 1.5\n0.5 1.5\n")
    ledger = FileLedger("a")

    (rows,) = TextTable(tmp_path / "a", Format(header=True)).chunks([0, 1], ledger)

    assert len(rows) == 2
    assert ledger.repeated_headers == 0
