"""Text tables: every number bit for bit, every damaged line refused by its number."""

import gzip
import hashlib
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from reweight.errors import DataFileError
from reweight.reading import FileLedger
from reweight.reading.text import TextTable
from reweight.study import Format


def table_of(folder, text, declared=None, **options):
    path = folder / "data.dat"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return TextTable(path, declared or Format(), **options)


def numbers(table, columns=None, ledger=None):
    columns = range(len(table.names)) if columns is None else columns
    return np.concatenate(list(table.chunks(columns, ledger or FileLedger("data.dat"))))


@pytest.mark.parametrize(
    ("text", "names", "values"),
    [
        ("1 2\n3 4\n", ("1", "2"), [[1, 2], [3, 4]]),
        ("1,2\n3,4\n", ("1", "2"), [[1, 2], [3, 4]]),
        ("1;2\n3;4\n", ("1", "2"), [[1, 2], [3, 4]]),
        ("1\t2\n3\t4\n", ("1", "2"), [[1, 2], [3, 4]]),
        ("  1  2  \n\t3 4\t\n", ("1", "2"), [[1, 2], [3, 4]]),
        (" 1 , 2\n 3 , 4\n", ("1", "2"), [[1, 2], [3, 4]]),
        ("7\n", ("1",), [[7]]),
        ("-1.5e-3 +2.E+2 .5\n", ("1", "2", "3"), [[-1.5e-3, 200, 0.5]]),
        ("a b\n1 2\n", ("a", "b"), [[1, 2]]),
        ('"a","b c"\n1,2\n', ("a", "b c"), [[1, 2]]),
        ("# a b\n1 2\n", ("a", "b"), [[1, 2]]),
        ("# written by hand in spring\n# a b\n# and a long remark\n1 2\n", ("a", "b"), [[1, 2]]),
        ("#a, b\n1 2\n", ("a", "b"), [[1, 2]]),
        ("# 1.0 2.0\n1 2\n", ("1", "2"), [[1, 2]]),
        ("# step E[kJ/mol] rg [nm]\n1 2 3\n", ("step", "E[kJ/mol]", "rg[nm]"), [[1, 2, 3]]),
        ('@ TYPE xy\n@ s0 "E"\n1 2\n', ("1", "2"), [[1, 2]]),
        ("; a b\n! c\n% d\n& e\n// f\n1 2\n", ("a", "b"), [[1, 2]]),
        ("1 2\n\n# restarted\n3 4\n   \n", ("1", "2"), [[1, 2], [3, 4]]),
        ("1 2\n3 4\n# no line end", ("1", "2"), [[1, 2], [3, 4]]),
        ("\ufeffa b\r\n1 2\r\n3 4\r\n", ("a", "b"), [[1, 2], [3, 4]]),
        ("\ufeff1 2\n", ("1", "2"), [[1, 2]]),
        ("1.0D+03 -2.5d-3\n.5D0 1D2\n", ("1", "2"), [[1000, -0.0025], [0.5, 100]]),
        ("E d\n1 2\n3d0 4\n", ("E", "d"), [[1, 2], [3, 4]]),
        ("when;E\nDec d;1,5D1\nDec D;2,5\n", ("when", "E"), None),
        ("E;m\n1,5;2\n-2,5e3;4\n1,234;5\n", ("E", "m"), [[1.5, 2], [-2500, 4], [1.234, 5]]),
        ("E;m\n1.5;2\n", ("E", "m"), [[1.5, 2]]),
        ("1e-400 4.9406564584124654e-324\n", ("1", "2"), [[0.0, 5e-324]]),
    ],
)
def test_usual_files_are_understood(tmp_path, text, names, values):
    for block_size in (1, 7, 1 << 20):
        table = table_of(tmp_path, text, block_size=block_size)
        assert table.names == names
        if values is None:  # one column holds words
            np.testing.assert_array_equal(numbers(table, [1]), [[15], [2.5]])
        else:
            np.testing.assert_array_equal(numbers(table), values)


@pytest.mark.parametrize(
    ("declared", "text", "names", "values"),
    [
        ({"decimal": ","}, "E;m\n1,5;2\n-2,5e3;4\n", ("E", "m"), [[1.5, 2], [-2500, 4]]),
        ({"decimal": ","}, "1,5 2\n", ("1", "2"), [[1.5, 2]]),
        ({"delimiter": "|"}, "1|2\n", ("1", "2"), [[1, 2]]),
        ({"delimiter": " "}, "1, 2\n".replace(",", ""), ("1", "2"), [[1, 2]]),
        ({"comment": ("$", "REM")}, "$ a b\nREM x y z\n1 2\n", ("a", "b"), [[1, 2]]),
        ({"header": True}, "10 20\n1 2\n", ("10", "20"), [[1, 2]]),
        ({"header": False}, "# a b\n1 2\n", ("1", "2"), [[1, 2]]),
        ({"encoding": "utf-16"}, "É m\n1 2\n".encode("utf-16"), ("É", "m"), [[1, 2]]),
        ({"delimiter": "\t"}, "E\tm\n0,125\t2\n", ("E", "m"), [[0.125, 2]]),
        ({"decimal": ","}, "E;m\n1,234;2\n", ("E", "m"), [[1.234, 2]]),
        (
            {"thousands": ","},
            "E m\n1,234 12,345,678.5\n-1234 1e3\n",
            ("E", "m"),
            [[1234, 12345678.5], [-1234, 1e3]],
        ),
        ({"thousands": ","}, "E;m\n1,234;2,000D1\n", ("E", "m"), [[1234, 20000]]),
        ({"thousands": "."}, "E;m\n1.234,5;2\n", ("E", "m"), [[1234.5, 2]]),
        ({"thousands": "'"}, "1'234.5 2\n", ("1", "2"), [[1234.5, 2]]),
        ({"thousands": " "}, "E;m\n1 234,5;2\n", ("E", "m"), [[1234.5, 2]]),
        ({"thousands": " "}, "E;m\n1\u202f234,5;2\u00a0000\n", ("E", "m"), [[1234.5, 2000]]),
        ({"largest_line": 2_000_000}, "1" + " " * 1_500_000 + "2\n", ("1", "2"), [[1, 2]]),
        ({"most_columns": 20_000}, "1 " * 10_001 + "\n", tuple(map(str, range(1, 10_002))), [[1] * 10_001]),
        ({"encoding": "latin-1"}, "É m\n1 2\n".encode("latin-1"), ("É", "m"), [[1, 2]]),
    ],
)
def test_declared_format_wins(tmp_path, declared, text, names, values):
    table = table_of(tmp_path, text, Format(**declared))
    assert table.names == names
    np.testing.assert_array_equal(numbers(table), values)


def test_columns_of_words_are_no_obstacle_to_the_others(tmp_path):
    table = table_of(tmp_path, "when,E,what\n12:00,1,a\n12:01,2,#b\n#12:02,3,c\n12:03,nan?,\n")
    with pytest.raises(DataFileError, match="line 5: column 'E'"):
        numbers(table, [1])
    table = table_of(tmp_path, "when,E,what\n12:00,1,a\n12:01,2,#b\n#12:02,3,c\n12:03,4,\n")
    np.testing.assert_array_equal(numbers(table, [1]), [[1], [2], [4]])
    with pytest.raises(DataFileError, match="line 2: column 'what' must hold finite numbers; got 'a'"):
        numbers(table, [2])


def test_comment_that_looks_like_a_row_of_words_and_numbers_is_no_row(tmp_path):
    table = table_of(tmp_path, "when,E,what\n12:00,1,a\n#12:02,3,c\n12:03,4,d\n")
    np.testing.assert_array_equal(numbers(table, [1]), [[1], [4]])


def test_short_row_is_refused_when_the_last_column_holds_words(tmp_path):
    with pytest.raises(DataFileError, match="line 3: rows must have 2 columns"):
        numbers(table_of(tmp_path, "E,what\n1,a\n2\n3,b\n"), [0])


def test_columns_come_in_the_order_asked(tmp_path):
    table = table_of(tmp_path, "1 2 3\n4 5 6\n")
    np.testing.assert_array_equal(numbers(table, [2, 0]), [[3, 1], [6, 4]])


GOOD = "".join(f"{row} {row / 7!r}\n" for row in range(50))


@pytest.mark.parametrize(
    ("line", "message"),
    [
        ("1 nan", "column '2' must hold finite numbers; got 'nan'"),
        ("1 -inf", "column '2' must hold finite numbers; got '-inf'"),
        ("1 Infinity", "column '2' must hold finite numbers"),
        ("1 1e400", "column '2' must hold numbers below 1.8e308; got '1e400'"),
        ("1 NA", "column '2' must hold finite numbers; got 'NA'"),
        ("1 ********", "got '\\*+'. Stars are a number that did not fit"),
        ("1 1,5", 'If this is a decimal comma.*thousands = ","'),
        ("1 1,234,567.5", "If commas separate thousands, say thousands"),
        ("1 1.234-103", "got '1.234-103'. Two numbers run together, or an exponent without its letter"),
        ("1 1.5DD2", "got '1.5DD2'"),
        ("1 1.5D", "got '1.5D'"),
        ("1 1_000", "got '1_000'"),
        ("1 0x1A", "got '0x1A'"),
        ("1 1.5.3", "got '1.5.3'"),
        ("1 -12.5-13.5", "got '-12.5-13.5'"),
        ("1 1e", "got '1e'"),
        ("1 ١", "got '١'"),
        ("1 True", "got 'True'"),
        ('1 "2"', "got '\"2\"'"),
        ("1 2\x0b3", r"got '2\\x0b3'"),
        ("1", "rows must have 2 columns like the first one \\(line 1\\); got 1 in '1'"),
        ("1 2 3", "rows must have 2 columns .* got 3 in '1 2 3'"),
        ("1 2 # note", "rows must have 2 columns .* got 4"),
        ("step energy", "column '2' must hold finite numbers; got 'energy'"),
        (
            "1 2\r3 4",
            "rows must have 2 columns .* got 3 .*carriage returns alone, as on very old Macs: convert it",
        ),
        ("1 2\x00", "must not hold NUL bytes"),
        ("1 2\udcff", "got '2\ufffd'"),
    ],
)
@pytest.mark.parametrize("block_size", [16, 1 << 20])
def test_damaged_line_is_refused_by_its_number(tmp_path, line, message, block_size):
    text = f"{GOOD}{line}\n{GOOD}".encode("utf-8", errors="surrogateescape")
    table = table_of(tmp_path, text, block_size=block_size)
    with pytest.raises(DataFileError, match=f"data.dat, line 51: .*{message}") as caught:
        numbers(table, [1])
    assert (caught.value.line, caught.value.path) == (51, str(tmp_path / "data.dat"))


def test_damage_in_the_first_column_is_seen_though_another_is_asked(tmp_path):
    with pytest.raises(DataFileError, match="line 2: rows must have 3 columns"):
        numbers(table_of(tmp_path, "1,2,3\n4,5\n6,7,8\n"), [0])


@pytest.mark.parametrize("rest", ["-25", "3 -2512.33", "3 "])
def test_last_line_without_end_may_be_cut_short(tmp_path, rest):
    for block_size in (3, 1 << 20):
        table = table_of(tmp_path, f"1 -2512.33\n2 -2512.33\n{rest}", block_size=block_size)
        with pytest.raises(DataFileError, match=r"line 3: the last line must end.*add a line end"):
            numbers(table)


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (b"", "it is empty"),
        (b"\n \n", "all its 2 lines are header or comment"),
        (b"a b\n", "all its 1 lines are header or comment"),
        (b"# a\n# b\n", "all its 2 lines are header or comment"),
        (b"\x93NUMPY\x01\x00v\x00", "line 1: text must not hold NUL bytes"),
        ("1 2\n".encode("utf-16-le"), r'line 1: text must not hold NUL bytes.*encoding = "utf-16"'),
        (b"7" * 1_000_001, "line 1: lines must not be longer than 1000000 bytes. Is it .*raise largest_line"),
        (b"7\r" * 500_001, "line 1: lines must not be longer .* old Macs.*tr"),
        (
            b"E m\r1 2\r3 4\r",
            "line 1: lines must end with a line feed; got carriage returns inside.* old Macs",
        ),
        (b"# E m\r1 2\r3 4\r", "line 1: lines must end with a line feed"),
        (b"1 2\r3 4\r", "line 1: lines must end with a line feed"),
        (
            b"1 " * 10_001 + b"\n",
            "line 1: rows must have at most 10000 columns; got 10001.*raise most_columns",
        ),
        (
            b"E\n1,2\n",
            r"line 1: header must name every column; got 1 names for 2 columns \(first row: line 2\)",
        ),
        (b"a b c\n1 2\n", "line 1: header must name every column; got 3 names for 2"),
    ],
)
def test_what_holds_no_table_is_refused_on_opening(tmp_path, text, message):
    with pytest.raises(DataFileError, match=message):
        table_of(tmp_path, text)


def test_overlong_line_behind_good_rows_is_refused(tmp_path):
    table = table_of(tmp_path, b"1 2\n" * 5 + b"1" * 1_100_000, block_size=100)
    with pytest.raises(DataFileError, match="line 6: lines must not be longer"):
        numbers(table)


def test_wrongly_declared_encoding_is_refused(tmp_path):
    table = table_of(tmp_path, b"1 2\n" * 5000 + b"1 \x81\n", Format(encoding="cp1252"), block_size=1000)
    with pytest.raises(DataFileError, match=r"must be in the encoding given under \[format\]; got: .*0x81"):
        numbers(table)


@pytest.mark.parametrize("encoding", ["utf-8-sig", "utf-16", "utf-32"])
@pytest.mark.parametrize("ending", ["\n", "\r\n"])
@pytest.mark.parametrize("declared", [None, "latin-1"])
def test_a_byte_order_mark_says_the_encoding(tmp_path, encoding, ending, declared):
    text = ending.join(["É m", "1 2", "3 4", ""])
    for block_size in (3, 1 << 20):
        table = table_of(tmp_path, text.encode(encoding), Format(encoding=declared), block_size=block_size)
        assert table.names == ("É", "m")
        np.testing.assert_array_equal(numbers(table), [[1, 2], [3, 4]])


def test_utf_16_of_the_other_byte_order_and_cut_short(tmp_path):
    raw = "\ufeff1 2\n3 4\n".encode("utf-16-be")
    np.testing.assert_array_equal(numbers(table_of(tmp_path, raw)), [[1, 2], [3, 4]])
    with pytest.raises(DataFileError, match=r"text must be in the encoding"):
        numbers(table_of(tmp_path, raw[:-1]))


@pytest.mark.parametrize(
    "row", ["1,23,456", "1234,567", ",123", "1,234,", "1,2345", "1.234,567", "1,234.567,890", "1,234e1,000"]
)
def test_thousands_must_come_in_threes(tmp_path, row):
    table = table_of(tmp_path, f"E m\n0 1\n0 {row}\n", Format(thousands=","))
    with pytest.raises(DataFileError, match="line 3: column 'm' must hold finite numbers"):
        numbers(table)


def test_a_thousands_sign_that_separates_columns_is_refused(tmp_path):
    with pytest.raises(DataFileError, match=r"line 1: what separates columns must not .*got ' ' for both"):
        table_of(tmp_path, "1 234 5\n", Format(thousands=" "))


def test_a_comma_that_may_separate_thousands_is_refused_until_its_meaning_is_declared(tmp_path):
    table = table_of(tmp_path, "E;m\n1,234;2\n")
    with pytest.raises(DataFileError, match=r'line 2: .*If this is a decimal comma, say decimal = ","'):
        numbers(table)


@pytest.mark.parametrize("first", ["1.5-103", "-12.5-13.5", "12.3.4", "1e+"])
def test_a_damaged_first_row_is_no_header(tmp_path, first):
    table = table_of(tmp_path, f"{first}\n2\n")
    with pytest.raises(DataFileError, match="line 1: column '1' must hold finite numbers"):
        numbers(table)


def test_fortran_exponents_are_parsed_as_fast_as_others(tmp_path, monkeypatch):
    """Line by line would be fifty times slower, so those lines must not be needed."""
    table = table_of(tmp_path, "".join(f"{row}.5D+01\n" for row in range(100)))
    monkeypatch.setattr(table, "_scanned", None)
    np.testing.assert_array_equal(numbers(table)[:, 0], 10 * np.arange(100) + 5)


def test_compressed_text_is_read_and_its_own_bytes_are_hashed(tmp_path):
    raw = gzip.compress(GOOD.encode())
    ledger = FileLedger("data.dat")
    assert len(numbers(table_of(tmp_path, raw, block_size=64), ledger=ledger)) == 50
    assert (ledger.size, ledger.sha256) == (len(raw), hashlib.sha256(raw).hexdigest())


@pytest.mark.parametrize("damage", ["cut", "flipped", "rest"])
def test_damaged_compressed_file_is_refused(tmp_path, damage):
    raw = gzip.compress("".join(f"{row / 7!r}\n" for row in range(100_000)).encode())
    flipped = bytearray(raw)
    flipped[len(raw) // 2] ^= 0xFF
    bad = {"cut": raw[:-5], "flipped": bytes(flipped), "rest": raw + b"xx"}[damage]
    with pytest.raises(DataFileError, match=r"compressed file must be|must hold finite numbers|NUL|columns"):
        numbers(table_of(tmp_path, bad))


def test_ledger_counts_rows_and_hashes_bytes(tmp_path):
    text = f"# a b\n{GOOD}\n# end\n".encode()
    for block_size in (5, 1 << 20):
        ledger = FileLedger("data.dat")
        numbers(table_of(tmp_path, text, block_size=block_size), [0], ledger)
        assert (ledger.rows_read, ledger.size) == (50, len(text))
        assert ledger.sha256 == hashlib.sha256(text).hexdigest()


def test_reading_can_be_repeated_and_abandoned(tmp_path):
    table = table_of(tmp_path, GOOD, block_size=16)
    first = next(iter(table.chunks([0], FileLedger("data.dat"))))
    assert len(first) < 50
    np.testing.assert_array_equal(numbers(table), numbers(table))


FINITE = st.floats(allow_nan=False, allow_infinity=False)


@settings(max_examples=60, deadline=None)
@given(
    rows=st.integers(1, 4).flatmap(
        lambda width: st.lists(st.lists(FINITE, min_size=width, max_size=width), min_size=1, max_size=20)
    ),
    delimiter=st.sampled_from([" ", ",", ";", "\t", "  ", ", "]),
    header=st.sampled_from(["", "header"]),
    ending=st.sampled_from(["\n", "\r\n"]),
    block_size=st.sampled_from([1, 2, 50, 1 << 20]),
)
def test_what_numpy_writes_is_read_back_bit_for_bit(
    tmp_path_factory, rows, delimiter, header, ending, block_size
):
    path = tmp_path_factory.mktemp("saved") / "data.dat"
    # 17 digits identify every double (IEEE 754-2008, 5.12.2)
    np.savetxt(path, rows, fmt="%.17g", delimiter=delimiter, header=header, newline=ending)
    table = TextTable(path, Format(), block_size=block_size)
    assert numbers(table).tobytes() == np.array(rows).tobytes()


@settings(max_examples=200, deadline=None)
@given(
    digits=st.from_regex(
        r"[+-]?([0-9]{1,40}\.?[0-9]{0,40}|\.[0-9]{1,40})([eE][+-]?[0-9]{1,3})?", fullmatch=True
    )
)
def test_any_decimal_number_is_rounded_correctly(tmp_path_factory, digits):
    path = tmp_path_factory.mktemp("digits") / "data.dat"
    path.write_text(f"0 {digits}\n")
    table = TextTable(path, Format())
    if np.isfinite(float(digits)):
        assert numbers(table)[0, 1].tobytes() == np.float64(digits).tobytes()
    else:
        with pytest.raises(DataFileError, match=r"below 1.8e308"):
            numbers(table)


@settings(max_examples=500, deadline=None)
@given(
    field=st.text(st.sampled_from("0123456789+-.eE,_ \t\x0b\x0c\xa0naifNAIF*#\"'dDxlL"), max_size=8),
    delimiter=st.sampled_from([",", ";", " "]),
)
def test_fast_and_careful_reading_agree_on_what_a_row_is(tmp_path_factory, field, delimiter):
    """Whatever the parser makes of a field, line by line reading must make the same of it."""
    path = tmp_path_factory.mktemp("field") / "data.dat"
    good = delimiter.join(["1", "2", "3"]) + "\n"
    bad = delimiter.join(["1", field, "3"]) + "\n"
    outcomes = []
    for separating in ("", "\n"):  # an empty line brings in the careful reading
        path.write_text(f"{good}{separating}{bad}")
        try:
            outcomes.append(numbers(TextTable(path, Format(delimiter=delimiter))).tolist())
        except DataFileError as error:
            outcomes.append(error.args[0].split(": ", 1)[1])
    assert outcomes[0] == outcomes[1]


@pytest.mark.parametrize("block_size", [8, 1 << 20])
def test_a_byte_order_mark_in_the_midst_is_refused_wherever_blocks_end(
    tmp_path: Path, block_size: int
) -> None:
    path = tmp_path / "joined.dat"
    path.write_bytes(b"1;2\n3;4\n\xef\xbb\xbf5;6\n")
    table = TextTable(path, Format(), block_size=block_size)

    with pytest.raises(DataFileError, match=r"line 3"):
        list(table.chunks([0, 1], FileLedger("joined.dat")))
