"""Every fault ends with its status, one clear message, no traceback and no output file."""

from __future__ import annotations

import gzip
import re
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

Break = Callable[[Path], None]


def _replace(file: str, old: str, new: str) -> Break:
    def spoil(folder: Path) -> None:
        path = folder / file
        text = path.read_text()
        assert old in text  # otherwise nothing is broken
        path.write_text(text.replace(old, new, 1))

    return spoil


def _line(number: int, text: str) -> Break:
    def spoil(folder: Path) -> None:
        lines = (folder / "cold.dat").read_text().splitlines(keepends=True)
        lines[number - 1] = text
        (folder / "cold.dat").write_text("".join(lines))

    return spoil


def _write(content: bytes) -> Break:
    return lambda folder: (folder / "cold.dat").write_bytes(content) and None


def _cut(folder: Path) -> None:
    text = (folder / "cold.dat").read_text()
    (folder / "cold.dat").write_text(text[:-4])


def _truncated_gzip(folder: Path) -> None:
    packed = gzip.compress((folder / "cold.dat").read_bytes())
    (folder / "cold.dat").write_bytes(packed[: len(packed) // 2])


def _remove(folder: Path) -> None:
    (folder / "cold.dat").unlink()


def _folder(folder: Path) -> None:
    (folder / "cold.dat").unlink()
    (folder / "cold.dat").mkdir()


def _far_apart(folder: Path) -> None:
    rng = np.random.default_rng(5)
    for name, mean in (("cold", 0.0), ("hot", 900.0)):
        rows = np.column_stack([np.arange(500), rng.normal(mean, 5.0, 500)])
        np.savetxt(folder / f"{name}.dat", rows, fmt=["%d", "%.6f"], header="step potential")


def _timed(then: Break) -> Break:
    """The column step is the clock."""

    def spoil(folder: Path) -> None:
        _replace("study.toml", "[columns]", '[columns]\ntime = "step"\ntime_unit = "step"')(folder)
        then(folder)

    return spoil


def _exchanging(then: Break) -> Break:
    def spoil(folder: Path) -> None:
        _replace("study.toml", "[columns]", "[conditions]\nexchange = true\n[columns]")(folder)
        then(folder)

    return spoil


def _retimed(folder: Path, times: np.ndarray) -> None:
    rows = np.loadtxt(folder / "cold.dat")
    rows[:, 0] = times
    np.savetxt(folder / "cold.dat", rows, fmt=["%d", "%.8f"], header="step potential[kJ/mol]")


def _slower(folder: Path) -> None:
    times = np.arange(4000) * 10
    _retimed(folder, np.where(times > 20_000, 20_000 + 1.4 * (times - 20_000), times))


def _twice_as_slow(folder: Path) -> None:
    _retimed(folder, np.arange(4000) * 2)


def _swapped(folder: Path) -> None:
    lines = (folder / "cold.dat").read_text().splitlines(keepends=True)
    (folder / "first.dat").write_text("".join(lines[:2001]))
    (folder / "cold.dat").write_text("".join([lines[0], *lines[2001:]]))
    _replace("study.toml", '["cold.dat"]', '["cold.dat", "first.dat"]')(folder)


STUDY_FAULTS: dict[str, tuple[Break, str]] = {
    "toml syntax": (_replace("study.toml", "schema = 1", "schema = = 1"), r"line 1"),
    "unknown key": (_replace("study.toml", "count = 20", "counts = 20"), r"system\.counts.*count"),
    "missing unit": (_replace("study.toml", 'energy_unit = "kJ/mol"', ""), r"energy_unit"),
    "unknown unit": (_replace("study.toml", '"kJ/mol"', '"kj/mole!"'), r"energy_unit"),
    "newer schema": (_replace("study.toml", "schema = 1", "schema = 2"), r"schema"),
    "negative temperature": (_replace("study.toml", "300.0", "-300.0"), r"run\[1\].*temperature.*-300"),
    "zero temperature": (_replace("study.toml", "300.0", "0.0"), r"run\[1\].*temperature"),
    "two labels": (
        _replace("study.toml", "temperature = 300.0", "temperature = 300.0\nbeta = 0.4"),
        r"run\[1\].*beta",
    ),
    "no label": (_replace("study.toml", "temperature = 300.0", ""), r"run\[1\].*temperature"),
    "same name twice": (_replace("study.toml", 'name = "hot"', 'name = "cold"'), r"run.*name.*cold"),
    "feature of a later version": (
        _replace("study.toml", "[columns]", '[report]\nauthor = "x"\n[columns]'),
        r"report is known but this version cannot use it yet",
    ),
    "missing column": (_replace("study.toml", '"potential"', '"enthalpy"'), r"enthalpy.*step.*potential"),
    "left out without reason": (
        _replace("study.toml", 'name = "hot"', 'name = "hot"\nuse = false'),
        r"run\[2\].*reason",
    ),
    "value to count above is not finite": (
        _replace("study.toml", "[columns]", '[observables.q]\ncolumn = "step"\nabove = nan\n[columns]'),
        r"observables\.q\.above must be finite; got nan",
    ),
    "discards everything": (
        _replace("study.toml", 'name = "hot"', 'name = "hot"\ndiscard = 4000'),
        r"discard.*4000",
    ),
}

CLOCK_FAULTS: dict[str, tuple[Break, str]] = {
    "start as a time without a clock": (
        _replace("study.toml", 'name = "hot"', 'name = "hot"\ndiscard = "20 ns"'),
        r"run\[2\]\.discard .*needs a clock.*time_unit",
    ),
    "clock without a unit": (
        _replace("study.toml", 'energy = "potential"', 'energy = "potential"\ntime = "step"'),
        r"columns\.time_unit must be given",
    ),
    "column of times missing": (
        _replace("study.toml", "[columns]", '[columns]\ntime = "t"\ntime_unit = "ps"'),
        r"columns\.time must be a column.*step",
    ),
    "times that fall": (
        _timed(_line(12, "3 1.5\n")),
        r"cold\.dat, row 11: times must rise from row to row; got 3 after 9",
    ),
    "a row twice": (
        _timed(_line(12, "9 1.5\n")),
        r"cold\.dat, row 11: times must rise.*got 9 after 9.*written twice",
    ),
    "a row missing": (
        _timed(_line(12, "")),
        r"cold\.dat, row 11: times must rise in equal steps; got 11 after 9",
    ),
    "another interval from some row on": (
        _timed(_slower),
        r"cold\.dat, row \d+: times must rise in equal steps",
    ),
    "files in the wrong order": (
        _timed(_swapped),
        r"cold\.dat: files of a run must be in time order; a later file starts",
    ),
    "more time than there is": (
        _timed(_replace("study.toml", 'name = "hot"', 'name = "hot"\ndiscard = "5000 step"')),
        r"discard must leave.*'5000 step' of 4000 rows",
    ),
    "replica exchange of unequal lengths": (
        _exchanging(_line(4001, "")),
        r"same number of rows; got 3999 \(run 'cold'\) to 4000 \(run 'hot'\).*exchange = false",
    ),
    "replica exchange at unequal times": (
        _exchanging(_timed(_twice_as_slow)),
        r"equal times; got a row every 2 step \(run 'cold'\) and every 1 step \(run 'hot'\)",
    ),
}

FILE_FAULTS: dict[str, tuple[Break, str]] = {
    "missing file": (_remove, r"cold\.dat.*(No such file|exist)"),
    "folder for a file": (_folder, r"cold\.dat.*folder"),
    "empty file": (_write(b""), r"cold\.dat.*empty"),
    "header only": (_write(b"# step potential\n"), r"cold\.dat"),
    "nan": (_line(11, "9 nan\n"), r"cold\.dat, line 11.*nan"),
    "infinite": (_line(12, "10 inf\n"), r"cold\.dat, line 12.*inf"),
    "overflowing": (_line(13, "11 1e400\n"), r"cold\.dat, line 13.*1e400"),
    "stars": (_line(14, "12 *********\n"), r"cold\.dat, line 14.*\*\*\*"),
    "a word": (_line(15, "13 restart\n"), r"cold\.dat, line 15.*restart"),
    "short row": (_line(16, "14\n"), r"cold\.dat, line 16"),
    "long row": (_line(17, "15 1.0 2.0\n"), r"cold\.dat, line 17"),
    "cut last line": (_cut, r"cold\.dat, line 4001.*"),
    "truncated gzip": (_truncated_gzip, r"cold\.dat.*"),
    "binary": (_write(bytes(range(256)) * 40), r"cold\.dat.*"),
    "NUL bytes": (_line(18, "16 \0\0\0\0\n"), r"cold\.dat, line 18.*NUL"),
    "too few rows": (_write(b"0 1.5\n1 1.6\n2 1.7\n"), r"cold\.dat|cold"),
    "no overlap": (_far_apart, r"cold.*hot.*Add runs near 3\d\d"),
}


@pytest.mark.parametrize("name", [*STUDY_FAULTS, *CLOCK_FAULTS, *FILE_FAULTS])
def test_a_fault_is_refused_with_a_message_that_names_it(name, study, reweight):
    spoil, expected = (STUDY_FAULTS | CLOCK_FAULTS | FILE_FAULTS)[name]
    spoil(study.parent)
    before = sorted(study.parent.iterdir())

    outcome = reweight("combine", study)

    assert outcome.status == 2, outcome.stderr
    assert re.search(expected, outcome.stderr, re.DOTALL), outcome.stderr
    assert "Traceback" not in outcome.stderr
    assert outcome.stdout == ""
    assert sorted(study.parent.iterdir()) == before  # nothing was written


QUESTION_FAULTS = {
    "unknown quantity": (["curve", "FILE", "--of", "enthalpy"], r"enthalpy"),
    "unknown option": (["curve", "FILE", "--temperature", "300"], r"--temperature"),
    "no number": (["curve", "FILE", "--at", "warm"], r"warm"),
    "negative temperature": (["curve", "FILE", "--at", "-5"], r"absolute zero.*-5"),
    "only temperatures out of reach": (["curve", "FILE", "--at", "900"], r"reach.*900"),
    "limits out of order": (["curve", "FILE", "--from", "330", "--to", "300"], r"330.*300"),
    "level in percent": (["curve", "FILE", "--level", "95"], r"level.*0\.95"),
    "single and range": (["curve", "FILE", "--at", "310", "--from", "300"], r"--at"),
    "unit of another kind": (["curve", "FILE", "--energy-unit", "ps"], r"ps"),
    "one resample": (["curve", "FILE", "--errors", "bootstrap", "--resamples", "1"], r"at least 2; got 1"),
    "negative seed": (["curve", "FILE", "--errors", "bootstrap", "--seed", "-1"], r"seed.*-1"),
    "resamples not drawn": (["curve", "FILE", "--save-resamples", "FOLDER/r.nc"], r"--errors bootstrap"),
    "picture of unknown kind": (["curve", "FILE", "--plot", "FOLDER/picture.gif"], r"\.png.*picture\.gif"),
    "output folder missing": (["curve", "FILE", "--csv", "FOLDER/nowhere/x.csv"], r"nowhere"),
    "peak outside the reach": (["peak", "FILE", "--from", "800", "--to", "900"], r"reach"),
    "crossing without a value": (["crossing", "FILE", "--of", "energy"], r"--equals"),
    "crossing of nothing": (["crossing", "FILE", "--equals", "1"], r"--of"),
    "crossing of an unknown quantity": (
        ["crossing", "FILE", "--of", "enthalpy", "--equals", "1"],
        r"enthalpy",
    ),
    "value that is no number": (["crossing", "FILE", "--of", "energy", "--equals", "half"], r"half"),
    "value that is not finite": (
        ["crossing", "FILE", "--of", "energy", "--equals", "nan"],
        r"equals must be finite; got nan",
    ),
    "value that is not taken": (
        ["crossing", "FILE", "--of", "energy", "--equals", "1e4"],
        r"equals must lie between .* kJ mol-1, the values that energy takes from .* K; got 10000.*hotter than",
    ),
    "crossing outside the reach": (
        ["crossing", "FILE", "--of", "energy", "--equals", "77", "--from", "800", "--to", "900"],
        r"a crossing is looked for within",
    ),
    "crossing with its level in percent": (
        ["crossing", "FILE", "--of", "energy", "--equals", "77", "--level", "95"],
        r"level.*0\.95",
    ),
    "crossing into a folder that is missing": (
        ["crossing", "FILE", "--of", "energy", "--equals", "77", "--csv", "FOLDER/nowhere/x.csv"],
        r"nowhere",
    ),
    "fraction above a value that was not declared": (
        ["curve", "FILE", "--of", "energy.above"],
        r"a quantity must be one of .*energy\.above",
    ),
    "no such file": (["peak", "FOLDER/none.nc"], r"none\.nc"),
    "not a combined file": (["peak", "FOLDER/cold.dat"], r"combined file"),
}


@pytest.mark.parametrize("name", QUESTION_FAULTS)
def test_a_question_that_cannot_be_answered_is_refused(name, combined, reweight):
    arguments, expected = QUESTION_FAULTS[name]
    before = sorted(combined.parent.iterdir())

    outcome = reweight(
        *(
            str(each).replace("FILE", str(combined)).replace("FOLDER", str(combined.parent))
            for each in arguments
        )
    )

    assert outcome.status == 2, outcome.stderr
    assert re.search(expected, outcome.stderr, re.DOTALL), outcome.stderr
    assert "Traceback" not in outcome.stderr
    assert outcome.stdout == ""
    assert sorted(combined.parent.iterdir()) == before


def test_an_existing_output_is_kept_unless_replacing_is_asked_for(combined, study, reweight):
    kept = combined.read_bytes()

    refused = reweight("combine", study)
    assert refused.status == 2
    assert "--force" in refused.stderr
    assert combined.read_bytes() == kept

    assert reweight("combine", study, "--force").status == 0
    assert combined.read_bytes() == kept  # same input, same bytes


def test_an_input_is_never_replaced_even_by_force(study, reweight):
    data = study.parent / "cold.dat"
    before = data.read_bytes()

    outcome = reweight("combine", study, "-o", data, "--force")

    assert outcome.status == 2
    assert "input" in outcome.stderr
    assert data.read_bytes() == before
