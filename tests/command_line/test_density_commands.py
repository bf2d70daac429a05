"""``states``, ``distribution`` and the finer questions of ``curve``: text, JSON, CSV, pictures, exit status."""

from __future__ import annotations

import csv
import json
import math
import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import reweight as rw


def no_constants(text: str) -> dict[str, Any]:
    """JSON as the standard has it: no NaN, no Infinity."""

    def refuse(constant: str) -> None:
        raise AssertionError(f"{constant} is no JSON")

    return json.loads(text, parse_constant=refuse)


def read_csv(path: Path) -> tuple[list[str], list[list[str]]]:
    with path.open(newline="", encoding="utf-8") as stream:
        header, *rows = csv.reader(stream)
    assert all(len(row) == len(header) for row in rows)
    return header, rows


def columns(table: str) -> list[list[str]]:
    """Cells of a printed table, parted where two blanks stand."""
    return [re.split(r"\s{2,}", line.strip()) for line in table.splitlines()]


# --- states -----------------------------------------------------------------------------------------------------------


def test_states_prints_each_level_and_says_where_it_is_zero(lattice_file, reweight):
    outcome = reweight("states", lattice_file)

    assert outcome.status == 0
    header, *rows = columns(outcome.stdout)
    zero = re.fullmatch(r"ln g, 0 at (-?\d+)", header[1])
    assert header[0] == "energy"
    assert header[2] == "independent samples"
    assert zero is not None
    by_energy = {row[0]: row for row in rows}
    assert by_energy[zero[1]][1] == "0"
    marked = [row for row in rows if row[1].endswith(" !")]
    assert marked
    assert all((float(row[2].replace(",", "")) < 10) == row[1].endswith(" !") for row in rows)
    assert (
        f"{len(marked)} of {len(rows)} energies have fewer than 10 independent visits (marked !)"
        in outcome.stderr
    )
    assert reweight("states", lattice_file, "--quiet").stderr == ""


def test_states_absolute_counts_the_ground_states(lattice_file, reweight):
    record = no_constants(reweight("states", lattice_file, "--absolute", "--json").stdout)

    assert record["form"] == "reweight states 1"
    assert record["absolute"] is True
    assert record["reference_energy"] is None
    value, error = record["log_density_of_states"][0], record["log_density_of_states_standard_error"][0]
    assert record["energy"][0] == -128.0
    assert abs(value - math.log(2)) < 4 * error
    assert error < 0.3
    assert columns(reweight("states", lattice_file, "--absolute").stdout)[0][1] == "ln g"


def test_states_of_continuous_energies_are_per_bin(combined, reweight):
    outcome = reweight("states", combined)

    assert outcome.status == 0
    header, *_rows = columns(outcome.stdout)
    assert header[0] == "energy [kJ mol-1]"
    assert re.fullmatch(r"ln density of states \(bin width [\d.]+\), 0 at [\d.]+", header[1])


def test_states_and_python_give_the_same_numbers(lattice_file, tmp_path, reweight):
    target = tmp_path / "states.csv"
    record = no_constants(
        reweight("states", lattice_file, "--csv", target, "--json", "--level", "0.9").stdout
    )

    dataset = rw.states(rw.open_combined(lattice_file), level=0.9)
    header, rows = read_csv(target)
    assert header[0] == "energy [1]"
    for name in (
        "energy",
        "log_density_of_states",
        "log_density_of_states_standard_error",
        "independent_samples",
    ):
        place = next(at for at, title in enumerate(header) if title == f"{name} [1]")
        assert record[name] == dataset[name].to_numpy().tolist()
        assert [float(row[place]) for row in rows] == record[name]
    assert record["level"] == 0.9
    assert {"title", "errors", "seed", "verdict", "units"} <= set(record)


@pytest.mark.parametrize(
    "arguments", [["--bin-width", "-1"], ["--bin-width", "1e-9"], ["--bin-width", "1e300"], ["--level", "95"]]
)
@pytest.mark.parametrize("command", [["states"], ["distribution", "--at", "310"]])
def test_unusable_widths_and_levels_are_refused(combined, reweight, command, arguments):
    outcome = reweight(*command, combined, *arguments)

    assert outcome.status == 2
    assert re.search(r"must (be|lie)", outcome.stderr)
    assert outcome.stdout == ""


def test_states_absolute_is_refused_without_an_anchor(combined, reweight):
    outcome = reweight("states", combined, "--absolute")

    assert outcome.status == 2
    assert "the study declares neither" in outcome.stderr
    assert outcome.stdout == ""


# --- distribution -----------------------------------------------------------------------------------------------------


def test_distribution_prints_a_column_a_temperature_and_echoes_them(lattice_file, reweight):
    outcome = reweight("distribution", lattice_file, "--at", "2.3", "--at", "5,inf")

    assert outcome.status == 0
    header, *rows = columns(outcome.stdout)
    assert header == ["energy", "probability at 2.3", "probability at 5", "probability at inf"]
    assert "at 2.3, 5, inf" in outcome.stderr
    assert all(len(row) == 4 for row in rows)


def test_distribution_needs_a_temperature(lattice_file, reweight):
    outcome = reweight("distribution", lattice_file)

    assert outcome.status == 2
    assert "--at must name at least one temperature" in outcome.stderr


def test_a_distribution_out_of_reach_is_empty_counted_and_null(combined, reweight):
    outcome = reweight("distribution", combined, "--at", "310,900")

    assert outcome.status == 0
    assert "1 of 2 temperatures out of reach" in outcome.stderr
    _header, *rows = columns(outcome.stdout)
    assert {row[2] for row in rows} == {"-"}
    assert all(row[1] != "-" for row in rows)
    record = no_constants(reweight("distribution", combined, "--at", "310,900", "--json").stdout)
    assert record["within_reach"] == [True, False]
    assert set(record["probability"][1]) == {None}
    shown = no_constants(reweight("distribution", combined, "--at", "900", "--beyond-reach", "--json").stdout)
    assert None not in shown["probability"][0]
    assert shown["within_reach"] == [False]


def test_an_infinite_temperature_is_told_from_a_missing_one_in_json(lattice_file, hostile_names, reweight):
    """JSON knows no infinity: the temperature is null, its inverse is 0."""
    record = no_constants(reweight("distribution", lattice_file, "--at", "2.5,inf", "--json").stdout)

    assert record["form"] == "reweight distribution 1"
    assert record["temperature"] == [2.5, None]
    assert record["beta"] == [0.4, 0.0]
    assert record["within_reach"] == [True, True]
    assert sum(record["probability"][1]) == pytest.approx(1.0, abs=1e-12)
    assert record["run"] == list(hostile_names)


def test_distribution_tables_hold_all_digits_and_hostile_names_do_nothing(
    lattice_file, hostile_names, tmp_path, reweight
):
    target = tmp_path / "distribution.csv"
    record = no_constants(
        reweight("distribution", lattice_file, "--at", "2.3,inf", "--csv", target, "--json").stdout
    )

    header, rows = read_csv(target)
    assert header[3:5] == ["probability at 2.3 [1]", "probability_standard_error at 2.3 [1]"]
    assert header[-len(hostile_names) :] == [f"run_histogram of {name} [1]" for name in hostile_names]
    assert not any(cell[:1] in ("=", "+", "@") for cell in header)
    for place, name in ((3, "probability"), (4, "probability_standard_error"), (-1, "run_histogram")):
        expected = record[name][-1 if place == -1 else 0]
        assert [float(row[place]) for row in rows] == expected


def test_only_energies_can_be_distributed(lattice_file, reweight):
    outcome = reweight("distribution", lattice_file, "--at", "2", "--of", "magnetization")

    assert outcome.status == 2
    assert "got 'magnetization'" in outcome.stderr


# --- curve ------------------------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def observed_file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    rng = np.random.default_rng(61)
    runs = {}
    for temperature in (1.0, 1.2):
        energy = rng.gamma(30.0, temperature, 3000)
        runs[str(temperature)] = {"energy": energy, "size": np.sqrt(energy) + rng.standard_normal(3000)}
    combined = rw.combine(runs, temperatures=[1.0, 1.2], observables={"size": {"unit": "nm", "is": "plain"}})
    path = tmp_path_factory.mktemp("observed") / "observed.nc"
    rw.save(combined, path)
    return path


def test_the_list_of_quantities_names_everything_that_can_be_asked(observed_file, reweight):
    outcome = reweight("curve", observed_file, "--of", "list")

    assert outcome.status == 0
    names = [line.split()[0] for line in outcome.stdout.splitlines()[1:]]
    assert names == list(rw.open_combined(observed_file).quantity_names)
    assert {"entropy", "free_energy", "size.mean", "size.slope"} <= set(names)
    for name in names:
        assert reweight("curve", observed_file, "--of", name, "--at", "1.1").status == 0


def test_a_mean_of_an_observable_is_answered_with_its_unit(observed_file, reweight):
    record = no_constants(
        reweight("curve", observed_file, "--of", "size.mean", "--at", "1.1", "--json").stdout
    )

    dataset = rw.curve(rw.open_combined(observed_file), 1.1, of="size.mean")
    assert record["units"]["size_mean"] == "nm"
    assert record["size_mean"] == dataset["size_mean"].to_numpy().tolist()
    assert "mean_energy" not in record
    text = reweight("curve", observed_file, "--of", "size.mean", "--at", "1.1").stdout
    assert "mean size [nm]" in text


def test_an_entropy_says_what_it_is_counted_from(combined, reweight):
    default = reweight("curve", combined, "--of", "entropy", "--at", "310")
    moved = reweight("curve", combined, "--of", "entropy", "--at", "310,320", "--reference", "320")

    assert "entropy, counted from 300 K [kJ mol-1 K-1]" in default.stdout
    assert "entropy, counted from 320" in moved.stdout
    assert columns(moved.stdout)[2][1] == "0"  # at the reference itself


def test_a_reference_out_of_reach_is_refused_as_the_reference(combined, reweight):
    outcome = reweight("curve", combined, "--of", "entropy", "--at", "310", "--reference", "900")

    assert outcome.status == 2
    assert "the reference must lie in" in outcome.stderr
    assert "got 900 K" in outcome.stderr


def test_a_repeated_quantity_is_each_in_its_own_column(observed_file, reweight):
    outcome = reweight(
        "curve", observed_file, "--of", "free_energy", "--of", "size.slope", "--at", "1.05,1.15"
    )

    header, *rows = columns(outcome.stdout)
    assert [title.split(",")[0] for title in header] == [
        "temperature",
        "free energy over k_B T",
        "change of mean size with temperature [nm]",
        "effective samples",
    ]
    assert len(rows) == 2


# --- what all of them share -------------------------------------------------------------------------------------------

ENVELOPE = {"form", "title", "level", "errors", "seed", "verdict", "units"}


@pytest.mark.parametrize(
    "arguments",
    [
        ["states", "FILE"],
        ["states", "FILE", "--bin-width", "16"],
        ["distribution", "FILE", "--at", "0.01,2.2,inf"],
        ["curve", "FILE", "--points", "3"],
        ["curve", "FILE", "--of", "entropy", "--at", "0.5,2,inf", "--beyond-reach"],
        ["show", "FILE"],
        ["runs", "FILE"],
    ],
    ids=lambda each: " ".join(each).replace("FILE", "").replace("  ", " "),
)
def test_every_json_answer_has_the_envelope_and_no_constants(lattice_file, reweight, arguments):
    """Infinite temperatures and a temperature of almost zero are where NaN and Infinity would slip in."""
    outcome = reweight(*(str(lattice_file) if each == "FILE" else each for each in arguments), "--json")

    assert outcome.status == 0, outcome.stderr
    record = no_constants(outcome.stdout)
    assert set(record) >= ENVELOPE
    assert record["form"] == f"reweight {arguments[0]} 1"
    assert record["title"] == "=1+1 <script>alert('title')</script>"


@pytest.mark.parametrize("ending", ["png", "svg", "pdf"])
@pytest.mark.parametrize(
    "command", [["states"], ["distribution", "--at", "2.3,inf"]], ids=["states", "distribution"]
)
def test_pictures_are_the_same_bytes_every_time(lattice_file, tmp_path, reweight, command, ending):
    first, second = tmp_path / f"first.{ending}", tmp_path / f"second.{ending}"
    for target in (first, second):
        assert reweight(*command, lattice_file, "--plot", target).status == 0

    content = first.read_bytes()
    assert len(content) > 1000
    assert content == second.read_bytes()
    magic = {"png": b"\x89PNG", "svg": b"<?xml", "pdf": b"%PDF"}
    assert content.startswith(magic[ending])
    assert b"<script" not in content


@pytest.mark.parametrize(
    "command", [["states"], ["distribution", "--at", "2.3"]], ids=["states", "distribution"]
)
@pytest.mark.parametrize("option", ["--csv", "--plot"])
def test_an_existing_output_is_kept_and_the_combined_file_never_replaced(
    lattice_file, tmp_path, reweight, command, option
):
    ending = "csv" if option == "--csv" else "png"
    target = tmp_path / f"kept.{ending}"
    target.write_text("mine")

    refused = reweight(*command, lattice_file, option, target)
    assert refused.status == 2
    assert "--force" in refused.stderr
    assert target.read_text() == "mine"
    assert reweight(*command, lattice_file, option, target, "--force").status == 0
    assert target.read_bytes() != b"mine"

    before = lattice_file.read_bytes()
    assert reweight(*command, lattice_file, option, lattice_file, "--force").status == 2
    assert lattice_file.read_bytes() == before


def test_a_picture_in_a_format_nobody_asked_for_is_refused(lattice_file, tmp_path, reweight):
    outcome = reweight("states", lattice_file, "--plot", tmp_path / "picture.docx")

    assert outcome.status == 2
    assert re.search(r"\.pdf.*\.png.*\.svg", outcome.stderr)
    assert list(tmp_path.iterdir()) == []
