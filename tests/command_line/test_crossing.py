"""``reweight crossing``, on paper and for machines, and the fraction of samples above a value on its way to it."""

from __future__ import annotations

import csv
import json
import re

import numpy as np
import pytest

import reweight as rw

GAS_CONSTANT = 8.31446261815324e-3  # kJ/(mol K), exact by definition (SI 2019)
SHAPE = 30.0  # of the Gamma-distributed energies in the study: E = SHAPE R T
AT_315 = SHAPE * GAS_CONSTANT * 315.0


def test_a_crossing_is_printed_with_its_error_and_agrees_with_equipartition(combined, reweight):
    outcome = reweight("crossing", combined, "--of", "energy", "--equals", AT_315)

    assert outcome.status == 0, outcome.stderr
    assert outcome.stderr == ""
    first, second = outcome.stdout.splitlines()
    printed = re.fullmatch(
        r"mean energy equals 78\.571\d+ kJ mol-1 at ([\d.]+)\(([\d.]+)\) K, 95 % interval ([\d.]+) to ([\d.]+)",
        first,
    )
    temperature, _, low, high = map(float, printed.groups())
    assert float(low) < temperature < float(high)
    assert abs(temperature - 315) < high - low  # twice the half width: about four standard errors
    assert re.fullmatch(r"  slope 0\.2\d+\(\d+\) kJ mol-1 K-1", second)


def test_json_holds_what_python_answers(combined, reweight):
    asked = ("--of", "energy", "--equals", 78.0 / 20, "--per-count", "--level", "0.9")
    answer = json.loads(reweight("crossing", combined, *asked, "--json").stdout)

    assert answer["form"] == "reweight crossing 1"
    assert (answer["title"], answer["level"], answer["verdict"]) == ("Twenty oscillators", 0.9, "sound")
    assert answer["units"] == {"temperature": "K", "equals": "kJ mol-1", "slope": "kJ mol-1 K-1"}
    (found,) = answer["crossings"]
    (expected,) = rw.crossings(
        rw.open_combined(combined), of="energy", equals=78.0 / 20, per_count=True, level=0.9
    )
    for name in expected.__slots__:
        value = getattr(expected, name)
        assert found[name] == (list(value) if isinstance(value, tuple) else value), name


def test_a_crossing_is_one_row_of_plain_cells_with_units(combined, tmp_path, reweight):
    target = tmp_path / "crossing.csv"
    command = ("crossing", combined, "--of", "entropy", "--equals", "0.01", "--csv", target)
    (found,) = json.loads(reweight(*command, "--json").stdout)["crossings"]

    with target.open(newline="") as stream:
        (row,) = csv.DictReader(stream)
    assert float(row["equals [kJ mol-1 K-1]"]) == 0.01
    assert float(row["reference_temperature [K]"]) == 300.0
    assert float(row["temperature [K]"]) == found["temperature"]
    assert float(row["temperature_lower [K]"]) == found["temperature_interval"][0]
    assert float(row["slope [kJ mol-1 K-2]"]) == found["slope"]
    assert row["slope_significant"] == "true"
    assert sum(float(row[f"variance_share of {name}"]) for name in ("cold", "hot")) == pytest.approx(1)
    assert reweight(*command).status == 2  # the table exists
    again = reweight(*command, "--force")
    assert again.status == 0
    assert "entropy, counted from 300 K, equals 0.01" in again.stdout


def test_a_crossing_that_hardly_crosses_is_said_to_be_uncertain(combined, reweight):
    """The heat capacity of these oscillators is the same at all temperatures; what crosses is noise."""
    opened = rw.open_combined(combined)
    value = float(rw.curve(opened, 315.0, of="heat_capacity").heat_capacity[0])

    outcome = reweight("crossing", combined, "--of", "heat_capacity", "--equals", repr(value))

    assert outcome.status == 0
    assert re.search(r"heat capacity equals 0\.\d+ kJ mol-1 K-1 at about 315 K", outcome.stdout)
    assert re.search(
        r"uncertain: its slope there, .* is less than three of its standard errors", outcome.stdout
    )


def test_a_crossing_beyond_the_reach_is_marked(combined, reweight):
    value = SHAPE * GAS_CONSTANT * 1.02 * rw.reach(rw.open_combined(combined), "energy").highest
    asked = ("crossing", combined, "--of", "energy", "--equals", value, "--to", "600")

    assert reweight(*asked).status == 2
    outcome = reweight(*asked, "--beyond-reach")
    assert outcome.status == 0
    assert "beyond the reach of these runs" in outcome.stdout


@pytest.fixture
def counted(study, reweight):
    """The study with an observable of which samples above a value are counted."""
    for name, temperature in (("cold", 300.0), ("hot", 330.0)):
        energies = np.loadtxt(study.parent / f"{name}.dat")[:, 1]
        rng = np.random.default_rng(int(temperature))
        rows = np.column_stack([energies, energies / 78.0 + 0.1 * rng.standard_normal(energies.size)])
        np.savetxt(study.parent / f"{name}.dat", rows, fmt="%.8f", header="potential q")
    observable = '[observables.q]\ncolumn = "q"\nabove = 1.0\n\n[columns]'
    study.write_text(study.read_text().replace("[columns]", observable, 1))
    outcome = reweight("combine", study)
    assert outcome.status == 0, outcome.stderr
    return study.with_suffix(".nc")


def test_the_fraction_above_a_value_can_be_listed_asked_and_crossed(counted, reweight):
    listed = reweight("curve", counted, "--of", "list").stdout
    assert re.search(r"^q\.above +fraction of samples with q above 1$", listed, re.MULTILINE)
    assert "observable q: plain, unit 1, counted above 1\n" in reweight("show", counted).stdout

    curve = json.loads(reweight("curve", counted, "--of", "q.above", "--at", "300,330", "--json").stdout)
    assert curve["units"]["q_above"] == "1"
    assert 0 < curve["q_above"][0] < 0.5 < curve["q_above"][1] < 1

    crossing = reweight("crossing", counted, "--of", "q.above", "--equals", "0.5").stdout
    assert re.search(r"^fraction of samples with q above 1 equals 0\.5 at 31\d\.\d+\(\d", crossing)
    assert re.search(r"^  slope 0\.0\d+\(\d+\) K-1$", crossing, re.MULTILINE)
