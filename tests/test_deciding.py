"""What is decided about runs: how much is left out at the start, one common start for a replica exchange."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path

import numpy as np
import pytest

import reweight as rw
from reweight.datasets.sampling import correlated_normals

ROWS = 4000
TEMPERATURES = [1.0, 1.2, 1.4]


def runs(*decays: float, rows: int = ROWS) -> dict[str, np.ndarray]:
    """Three runs, each with an exponential start of its own length."""
    rng = np.random.default_rng(51)
    found = {}
    for t, time in zip(TEMPERATURES, decays, strict=True):
        start = 100 * np.exp(-np.arange(rows) / time) if time else 0.0
        found[f"T={t}"] = 30 * t + 5 * correlated_normals(rows, 0.5, rng) + start
    return found


@pytest.mark.parametrize(
    ("discard", "rows"), [(0, 0), (3, 3), ("10 %", 400), ("12.5%", 500), ("0.01 %", 1), ("0 %", 0)]
)
def test_rows_and_percentages_are_rounded_up(discard: int | str, rows: int) -> None:
    combined = rw.combine(runs(0, 0, 0), temperatures=TEMPERATURES, discard=discard)

    assert [run.decision.transient for run in combined.runs] == [rows] * 3


def test_a_start_may_be_a_time_where_the_time_between_samples_is_known() -> None:
    combined = rw.combine(
        runs(0, 0, 0), temperatures=TEMPERATURES, discard="1 ns", time_step=2.5, time_unit="ps"
    )

    assert [run.decision.transient for run in combined.runs] == [400] * 3
    with pytest.raises(
        rw.InputError, match=r"must go with a clock; got '1 ns'.*Pass time_step=0.5, time_unit"
    ):
        rw.combine(runs(0, 0, 0), temperatures=TEMPERATURES, discard="1 ns")


@pytest.mark.parametrize(
    ("keys", "message"),
    [
        ({"time_step": 0.0}, r"time_step must be finite and greater than 0; got 0"),
        ({"time_step": np.nan}, "time_step must be finite"),
        ({"time_unit": "ps"}, "time_unit must go with time_step; got 'ps' alone"),
        ({"time_step": 1.0, "time_unit": "kJ"}, "must be a time"),
        ({"discard": "5000 reduced", "time_step": 1.0}, "discard must leave at least 10 rows"),
        ({"discard": "1 ps", "time_step": 1.0}, "'ps' must be convertible to 'reduced'"),
    ],
)
def test_clocks_that_are_none_are_refused(keys: dict[str, object], message: str) -> None:
    with pytest.raises(rw.InputError, match=message):
        rw.combine(runs(0, 0, 0), temperatures=TEMPERATURES, **keys)


def test_runs_of_a_replica_exchange_start_together_with_the_latest(tmp_path: Path) -> None:
    apart = rw.combine(runs(5, 60, 0), temperatures=TEMPERATURES)
    together = rw.combine(runs(5, 60, 0), temperatures=TEMPERATURES, exchange=True)

    first = [run.decision.first_leaf for run in apart.runs]
    assert min(first) < max(first)  # otherwise nothing is shown
    assert [run.decision.first_leaf for run in together.runs] == [max(first)] * 3
    assert [run.decision.transient for run in together.runs] == [run.decision.transient for run in apart.runs]
    assert {run.samples for run in together.runs} == {apart.runs[1].samples}
    assert all(run.decision.common_start for run in together.runs)
    assert not any(run.decision.common_start for run in apart.runs)
    assert "replica exchange: one common start, the latest of all runs" in together.choices()
    assert apart.choices() == []
    rw.save(together, tmp_path / "c.nc")
    opened = rw.open_combined(tmp_path / "c.nc")
    assert opened.description.exchange
    assert [asdict(run.decision) for run in opened.runs] == [asdict(run.decision) for run in together.runs]


@pytest.mark.parametrize("rows", [4000, 70_000, 131_000, 140_001])
def test_blocks_of_equally_long_runs_cover_the_same_rows(rows: int) -> None:
    """Also where one run is so wide that it is kept as rows, and the other is not."""
    rng = np.random.default_rng(52)
    data = {"narrow": rng.normal(0, 1, rows), "wide": rng.normal(0, 300, rows)}

    combined = rw.combine(data, temperatures=[1.0, 1.001], exchange=True)

    one, other = combined.runs
    np.testing.assert_array_equal(one.leaf_rows, other.leaf_rows)


def test_runs_of_a_replica_exchange_must_be_equally_long() -> None:
    data = runs(0, 0, 0)
    data["T=1.2"] = data["T=1.2"][:-1]

    with pytest.raises(
        rw.InputError,
        match=r"same number of rows; got 3999 \(run 'T=1\.2'\) to 4000 \(run 'T=1\.0'\)\..*cut the files",
    ):
        rw.combine(data, temperatures=TEMPERATURES, exchange=True)
    rw.combine(data, temperatures=TEMPERATURES)  # independent runs need not be


def test_independent_samples_are_counted_by_the_slower_estimate() -> None:
    combined = rw.combine(runs(0, 0, 0), temperatures=TEMPERATURES, discard=0)

    for run in combined.runs:
        scales = run.time_scales["energy"]
        assert scales.series == run.decision.inefficiency
        assert run.independent_samples == ROWS / scales.slower.value


def test_an_observable_tallied_without_its_sign_is_correlated_without_its_sign() -> None:
    """Two rare flips of sign are no correlation of the energy; with its sign the observable is frozen."""
    rng = np.random.default_rng(53)
    size = 1 + 0.1 * rng.standard_normal(ROWS)
    sign = np.where((np.arange(ROWS) // 1000) % 2, -1, 1)
    data = {"a": {"energy": rng.gamma(30, 1, ROWS), "m": sign * size}}

    plain = rw.combine(data, temperatures=[1.0], discard=0).runs[0]
    unsigned = rw.combine(data, temperatures=[1.0], discard=0, observables={"m": {"absolute": True}}).runs[0]

    assert plain.time_scales["m"].slower.value > 300
    assert unsigned.time_scales["m"].slower.value < 3
    with pytest.raises(rw.InputError, match="series must be one of energy, m; got 'x'"):
        plain.series("x")
