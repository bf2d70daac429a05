"""What the screens say about time, correlation and the start of runs."""

from __future__ import annotations

import json
import re
from pathlib import Path

import numpy as np
import pytest

from reweight.datasets import shipped
from reweight.datasets.sampling import correlated_normals, draw_gamma

CLOCK = '[columns]\ntime = "step"\ntime_unit = "ps"'


@pytest.fixture
def timed(study: Path) -> Path:
    study.write_text(study.read_text().replace("[columns]", CLOCK))
    return study


def test_with_a_clock_correlation_is_shown_in_time_too(timed: Path, reweight) -> None:
    """One row a ps, so both numbers agree; g = 3 at a coefficient of 0.5."""
    first = reweight("combine", timed)
    assert first.status == 0

    for screen in (
        first.stdout,
        reweight("runs", timed).stdout,
        reweight("runs", timed.with_suffix(".nc")).stdout,
    ):
        found = re.findall(r"one in ([\d.]+)\((\d+)\), ([\d.]+)\((\d+)\) ps", screen)
        assert found
        for value, error, time, time_error in found:
            assert (value, error) == (time, time_error)
            assert 2 < float(value) < 6
    assert len(first.stdout.splitlines()) < 12


def test_without_a_clock_no_time_is_shown(study: Path, reweight) -> None:
    assert " ps" not in reweight("runs", study).stdout


def test_a_start_given_as_a_time_is_left_out_and_told(timed: Path, reweight) -> None:
    timed.write_text(timed.read_text().replace('name = "hot"', 'name = "hot"\ndiscard = "0.5 ns"'))
    assert reweight("combine", timed).status == 0

    record = json.loads(reweight("runs", timed.with_suffix(".nc"), "--json").stdout)["runs"][1]

    assert record["discard"] == "0.5 ns"
    assert 500 <= record["transient"] < 500 + 4000 / 62
    assert (record["time_step"], record["time_unit"]) == (1.0, "ps")
    assert "discard: 0.5 ns (run hot)" in reweight("show", timed.with_suffix(".nc")).stdout


def test_a_replica_exchange_is_named_on_the_first_screen_and_among_the_choices(study: Path, reweight) -> None:
    study.write_text(study.read_text().replace("[columns]", "[conditions]\nexchange = true\n[columns]"))

    first = reweight("combine", study)

    assert first.status == 0
    assert "one common start for the replica exchange" in first.stdout
    assert len(first.stdout.splitlines()) < 12
    assert "replica exchange: one common start" in reweight("show", study.with_suffix(".nc")).stdout
    records = json.loads(reweight("runs", study, "--json").stdout)["runs"]
    assert len({record["transient"] for record in records}) == 1
    assert all(record["common_start"] for record in records)


@pytest.fixture
def observed(study: Path) -> Path:
    """Two observables: one as fast as the energy, one so slow that the runs span few of its times."""
    rng = np.random.default_rng(43)
    for name, temperature in (("cold", 300.0), ("hot", 330.0)):
        energies = draw_gamma(30.0, 8.31446261815324e-3 * temperature, 4000, rng, coefficient=0.5)
        columns = [energies, correlated_normals(4000, 0.5, rng), correlated_normals(4000, 0.996, rng)]
        np.savetxt(
            study.parent / f"{name}.dat", np.column_stack(columns), fmt="%.8f", header="potential quick slow"
        )
    study.write_text(
        study.read_text() + '\n[observables.quick]\ncolumn = "quick"\n[observables.slow]\ncolumn = "slow"\n'
    )
    return study


def test_correlation_of_observables_is_shown_beside_that_of_the_energy(observed: Path, reweight) -> None:
    header, cold, *_ = reweight("runs", observed).stdout.splitlines()

    assert re.search(r"independent samples +quick +slow", header)
    assert len(re.findall(r"one in", cold)) == 3
    record = json.loads(reweight("runs", observed, "--json").stdout)["runs"][0]["correlation"]
    assert set(record) == {"energy", "quick", "slow"}
    for each in record.values():
        shown = 2 * each["integrated_autocorrelation_time_in_samples"]
        assert shown == each["by_series"] or shown == each["by_blocks"] > 1.5 * each["by_series"]
        assert each["by_series_standard_error"] > 0
    assert record["slow"]["by_series"] > 30 * record["quick"]["by_series"]


def test_runs_that_span_few_of_their_slowest_times_get_a_caution_with_advice(
    observed: Path, reweight
) -> None:
    outcome = reweight("combine", observed)

    assert outcome.status == 0
    assert re.search(
        r"caution: (cold|hot) spans \d+ times of its slowest process \(slow\); run it [\d.]+ times as long",
        outcome.stdout,
    )
    assert outcome.stdout.splitlines()[-1].startswith("caution; wrote")


def test_a_start_left_in_by_hand_gets_a_caution_with_what_to_write(study: Path, reweight) -> None:
    rows = np.loadtxt(study.parent / "hot.dat")
    rows[:, 1] += 60 * np.exp(-rows[:, 0] / 150)
    np.savetxt(study.parent / "hot.dat", rows, fmt=["%d", "%.8f"], header="step potential")
    study.write_text(study.read_text().replace('name = "hot"', 'name = "hot"\ndiscard = 50'))

    outcome = reweight("combine", study)

    advice = re.search(
        r"caution: hot starts at row \d+, by a second rule at row ([\d,]+).*; discard = (\d+)", outcome.stdout
    )
    assert advice
    assert advice[1].replace(",", "") == advice[2]
    study.write_text(study.read_text().replace("discard = 50", f"discard = {advice[2]}"))
    assert "second rule" not in reweight("combine", study, "--force").stdout


def test_blocking_curves_are_drawn_the_same_every_time(observed: Path, reweight) -> None:
    one, two = observed.parent / "one.png", observed.parent / "two.svg"
    assert reweight("runs", observed, "--plot", one).status == 0
    assert reweight("runs", observed, "--plot", two, "--of", "slow").status == 0

    assert one.read_bytes().startswith(b"\x89PNG")
    text = two.read_text()
    for expected in ("cold", "hot", "samples in a block", "standard error of mean slow"):
        assert expected in text
    before = one.read_bytes()
    assert reweight("runs", observed, "--plot", one).status == 2  # not replaced unasked
    assert reweight("runs", observed, "--plot", one, "--force").status == 0
    assert one.read_bytes() == before


def test_a_curve_of_an_unknown_column_is_refused(observed: Path, reweight) -> None:
    outcome = reweight("runs", observed, "--plot", observed.parent / "x.png", "--of", "pressure")

    assert outcome.status == 2
    assert "must be one of energy, quick, slow; got 'pressure'" in outcome.stderr
    assert not (observed.parent / "x.png").exists()


@pytest.mark.parametrize("name", ["bead-chain", "square-lattice"])
def test_shipped_runs_are_sound_and_their_first_screen_is_short(name: str, tmp_path: Path, reweight) -> None:
    outcome = reweight("combine", shipped(name) / "study.toml", "-o", tmp_path / "c.nc")

    assert outcome.status == 0
    assert len(outcome.stdout.splitlines()) < 12
    assert outcome.stdout.splitlines()[-1].startswith("sound; wrote")
