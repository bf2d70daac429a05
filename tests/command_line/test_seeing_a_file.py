"""The commands that show what a study or a combined file holds, and the texts that explain the words on the screen."""

from __future__ import annotations

import hashlib
import json
import re
from importlib.resources import files
from pathlib import Path

import numpy as np
import pytest

import reweight as rw
from reweight.guide import words
from reweight.study import load_study

HOSTILE_NAME = '=HYPERLINK("x"), <script>alert(1)'
HOSTILE_TITLE = "@SUM(A1) </script><script>alert('Ω → ∞')</script> \"quoted\""


def no_constants(text: str) -> dict:
    """JSON as the standard has it: no NaN, no Infinity."""

    def refuse(constant: str) -> None:
        raise AssertionError(f"{constant} is no JSON")

    return json.loads(text, parse_constant=refuse)


# --- show -------------------------------------------------------------------------------------------------------------


def test_show_says_what_a_file_is_and_what_may_be_asked_of_it(combined, reweight):
    outcome = reweight("show", combined)

    assert outcome.status == 0
    assert outcome.stderr == ""
    assert outcome.stdout.startswith("Twenty oscillators\n")
    for line in (
        r"energies in kJ/mol, temperatures in K",
        r"count: 20, per oscillator",
        r"2 runs, [\d,]+ samples after transients",
        r"^  300, 330 K$",
        r"energies kept as smooth weights on intervals of [\d.]+ kJ/mol",
        r"^verdict: sound$",
        r"^choices made by hand: none$",
    ):
        assert re.search(line, outcome.stdout, re.MULTILINE), line
    for hidden in ("tally", "node", "panel", "None", "nan"):
        assert hidden not in outcome.stdout


def test_show_prints_the_reach_that_python_finds(combined, reweight):
    outcome = reweight("show", combined)

    opened = rw.open_combined(combined)
    for name in opened.quantity_names:
        within = rw.reach(opened, name)
        row = next(line for line in outcome.stdout.splitlines() if line.strip().startswith(f"{name} "))
        low, high = (float(cell) for cell in re.findall(r"(?<= )\d+\.?\d*(?= |$)", row) if float(cell) > 100)
        assert low == pytest.approx(within.lowest, rel=1e-3)
        assert high == pytest.approx(within.highest, rel=1e-3)
        for text in within.limited_by:
            assert text in row


def test_show_tells_what_somebody_decided_by_hand(study, reweight):
    study.write_text(
        study.read_text().replace('name = "hot"', 'name = "hot"\ndiscard = 500')
        + '\n[[run]]\nname = "spoilt"\ntemperature = 320.0\nfiles = ["gone.dat"]\nuse = false\nreason = "disk full"\n'
    )
    assert reweight("combine", study).status == 0

    shown = reweight("show", study.with_suffix(".nc")).stdout

    assert re.search(
        r"choices made by hand:.*discard: 500 \(run hot\).*left out: spoilt \(disk full\)", shown, re.DOTALL
    )


def test_show_lists_the_inputs_with_their_hashes(combined, study, reweight):
    outcome = reweight("show", combined, "--inputs")

    for name in ("cold.dat", "hot.dat"):
        digest = hashlib.sha256((study.parent / name).read_bytes()).hexdigest()
        assert re.search(rf"{re.escape(name)} .*{digest}", outcome.stdout)


def test_the_record_of_show_is_json_with_the_envelope(combined, reweight):
    record = no_constants(reweight("show", combined, "--json").stdout)

    assert record["form"] == "reweight show 1"
    assert record["title"] == "Twenty oscillators"
    assert record["verdict"] == "sound"
    assert record["units"] == {"energy": "kJ/mol", "temperature": "K"}
    assert [run["name"] for run in record["runs"]] == ["cold", "hot"]
    assert "files" not in record["runs"][0]
    opened = rw.open_combined(combined)
    assert set(record["reach"]) == set(opened.quantity_names)
    assert record["reach"]["energy"]["lowest"] == rw.reach(opened, "energy").lowest
    assert record["sharing"] == opened.sharing.tolist()
    assert {each["check"] for each in record["findings"]}
    with_files = no_constants(reweight("show", combined, "--json", "--inputs").stdout)
    assert with_files["runs"][0]["files"][0]["rows_read"] == 4000


# --- runs -------------------------------------------------------------------------------------------------------------


def test_runs_of_a_study_and_of_the_file_made_from_it_are_the_same(study, combined, reweight):
    before, after = reweight("runs", study), reweight("runs", combined)

    assert before.status == after.status == 0
    assert before.stdout == after.stdout
    assert before.stderr == ""
    header, cold, hot, account = before.stdout.splitlines()
    assert header.split()[0] == "run"
    assert cold.startswith("cold ")
    assert hot.startswith("hot ")
    for expected in ("300", "4,000", "one in"):
        assert expected in cold
    assert account.startswith("8,000 rows read from 2 files: ")


def test_runs_writes_nothing(study, reweight):
    before = sorted(study.parent.iterdir())

    assert reweight("runs", study, "--inputs").status == 0
    assert sorted(study.parent.iterdir()) == before


def test_the_first_and_last_energies_are_those_of_the_file(study, reweight):
    energies = np.loadtxt(study.parent / "cold.dat")[:, 1]

    row = reweight("runs", study).stdout.splitlines()[1]

    assert f"{energies[0]:.7g}" in row
    assert f"{energies[-1]:.7g}" in row


def test_every_row_of_every_file_is_accounted_for(study, reweight):
    outcome = reweight("runs", study, "--inputs", "--json")

    for run in no_constants(outcome.stdout)["runs"]:
        for entry in run["files"]:
            parts = [entry[part] for part in ("kept", "transient", "replaced", "dropped")]
            assert entry["rows_read"] == sum(parts) == 4000


def test_runs_that_share_nothing_are_shown_all_the_same(study, reweight):
    rng = np.random.default_rng(5)
    for name, mean in (("cold", 0.0), ("hot", 900.0)):
        rows = np.column_stack([np.arange(500), rng.normal(mean, 5.0, 500)])
        np.savetxt(study.parent / f"{name}.dat", rows, fmt=["%d", "%.6f"], header="step potential")
    assert reweight("combine", study).status == 2

    outcome = reweight("runs", study)

    assert outcome.status == 0
    assert len(outcome.stdout.splitlines()) == 4
    assert re.search(r"^cold .* \d(\.\d+)?(e-\d+)?$", outcome.stdout, re.MULTILINE)
    record = no_constants(reweight("runs", study, "--json").stdout)
    assert record["sharing"][0] < 1
    assert record["verdict"] == "unsound"


def test_a_run_left_out_is_named_with_its_reason(study, reweight):
    study.write_text(
        study.read_text().replace('name = "hot"', 'name = "hot"\nuse = false\nreason = "wrong box"')
    )

    outcome = reweight("runs", study)

    assert "left out: hot (wrong box)" in outcome.stdout
    assert len(outcome.stdout.splitlines()) == 4


@pytest.mark.parametrize("command", ["show", "runs"])
def test_a_file_that_is_none_is_refused(command, tmp_path, reweight):
    outcome = reweight(command, tmp_path / "missing.nc")

    assert outcome.status == 2
    assert "missing.nc" in outcome.stderr
    assert outcome.stdout == ""


# --- labels that mean harm ----------------------------------------------------------------------------------------------


@pytest.fixture
def hostile(study: Path) -> Path:
    """Runs and title named to break tables, spreadsheets and pages."""
    text = study.read_text()
    text = text.replace('title = "Twenty oscillators"', f"title = {json.dumps(HOSTILE_TITLE)}")
    study.write_text(text.replace('name = "cold"', f"name = {json.dumps(HOSTILE_NAME)}"))
    return study


def test_hostile_labels_survive_in_every_record_and_change_nothing(hostile, reweight):
    assert reweight("combine", hostile).status == 0
    file = hostile.with_suffix(".nc")

    for command in (["show"], ["runs"], ["runs", "--inputs"]):
        record = no_constants(reweight(*command, file, "--json").stdout)
        assert record["title"] == HOSTILE_TITLE
        assert record["runs"][0]["name"] == HOSTILE_NAME
    assert HOSTILE_NAME in reweight("runs", file).stdout
    assert reweight("show", file).stdout.startswith(HOSTILE_TITLE)


@pytest.mark.parametrize(
    "name", ["a\u200fb", "a\u202eb", "tab\there", "two\nlines", "bell\a", "a/b", " blank"], ids=ascii
)
def test_names_that_would_garble_the_screen_are_refused(study, reweight, name):
    """Right-to-left marks and control characters reorder or hide what is printed beside them."""
    study.write_text(study.read_text().replace('name = "cold"', f"name = {json.dumps(name)}"))

    outcome = reweight("runs", study)

    assert outcome.status == 2
    assert re.search(r"run\[1\]\.name .*must", outcome.stderr)
    assert outcome.stderr.rstrip("\n").isprintable()  # the message is not garbled by what it refuses
    assert repr(name) in outcome.stderr


# --- explain ------------------------------------------------------------------------------------------------------------


def test_every_word_that_is_listed_has_a_text(reweight):
    listing = reweight("explain")

    assert listing.status == 0
    listed = [line.split()[0] for line in listing.stdout.splitlines()]
    assert listed == sorted(listed)
    assert set(listed) == set(words())
    assert {"reach", "overlap", "peak", "error-bars"} <= set(listed)
    for word in listed:
        outcome = reweight("explain", word)
        assert outcome.status == 0
        assert outcome.stdout.startswith(f"# {word.replace('-', ' ')}\n")
        assert len(outcome.stdout.split()) > 20


@pytest.mark.parametrize(
    "spelling", [["effective", "sample", "size"], ["Effective_Sample_Size"], ["effective-sample-size"]]
)
def test_a_word_may_be_spelled_as_on_the_screen(reweight, spelling):
    outcome = reweight("explain", *spelling)

    assert outcome.status == 0
    assert outcome.stdout.startswith("# effective sample size")


@pytest.mark.parametrize(
    ("word", "expected"), [("rech", "Did you mean reach"), ("zebra", "reweight explain lists them")]
)
def test_an_unknown_word_is_refused_with_the_nearest_ones(reweight, word, expected):
    outcome = reweight("explain", word)

    assert outcome.status == 2
    assert repr(word) in outcome.stderr
    assert expected in outcome.stderr
    assert outcome.stdout == ""


@pytest.mark.parametrize("word", ["../__init__", "/etc/hostname", "..", ""])
def test_a_word_is_never_a_path(reweight, word):
    outcome = reweight("explain", word)

    assert outcome.status == 2
    assert outcome.stdout == ""


GUIDE = sorted(each.name for each in files("reweight.guide").iterdir() if each.name.endswith(".md"))


@pytest.mark.parametrize("name", GUIDE)
def test_a_text_of_the_guide_begins_with_its_word_and_is_short(name):
    lines = (files("reweight.guide") / name).read_text("utf-8").splitlines()

    assert lines[0] == f"# {name.removesuffix('.md').replace('-', ' ')}"
    assert lines[1] == ""
    assert len([line for line in lines if not line.startswith("|")]) < 30  # tables are for looking things up


def test_the_study_in_the_guide_is_one(tmp_path):
    """What the text on `study` shows can be copied."""
    text = (files("reweight.guide") / "study.md").read_text("utf-8")
    example = "\n".join(line[4:] for line in text.splitlines() if line.startswith("    ") or not line.strip())
    path = tmp_path / "study.toml"
    path.write_text(example)

    loaded = load_study(path)

    assert loaded.energy_unit == "kJ/mol"
    assert [run.temperature for run in loaded.runs] == [300.0, 320.0]
