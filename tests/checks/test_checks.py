"""Every check finds what it is for, and leaves sound runs alone."""

from __future__ import annotations

from collections import Counter
from typing import Any

import numpy as np
import pytest
from scipy.stats import binom

import reweight as rw
from reweight.checks.all_checks import findings
from reweight.checks.doubled_start import doubled_start
from reweight.checks.finding import Finding, Verdict, worst
from reweight.checks.length import length
from reweight.checks.time_scales import slowest_times, two_time_scales
from reweight.checks.transient import transient_length, transient_rules
from reweight.datasets.sampling import correlated_normals, draw_gamma

TEMPERATURES = [1.0, 1.15, 1.3]
SHAPE = 30.0  # mean energy SHAPE T, heat capacity SHAPE


def gamma_runs(rows: int, coefficient: float, seed: int) -> dict[str, np.ndarray]:
    rng = np.random.default_rng([61, seed])
    return {f"T={t}": draw_gamma(SHAPE, t, rows, rng, coefficient=coefficient) for t in TEMPERATURES}


def combined_from(runs: dict[str, Any], **keys: Any) -> rw.DensityOfStates:
    return rw.combine(runs, temperatures=TEMPERATURES, **keys)


def starting_high(rows: int, time: float, seed: int = 1, size: float = 40.0) -> dict[str, np.ndarray]:
    """Runs that begin far above their mean energy and forget it in that time."""
    start = size * np.exp(-np.arange(rows) / time)
    return {name: run + start for name, run in gamma_runs(rows, 0.5, seed).items()}


def unsound(found: list[Finding]) -> list[Finding]:
    return [each for each in found if each.verdict is not Verdict.SOUND]


def test_stationary_runs_are_hardly_ever_doubted() -> None:
    """At most 2 % of studies for each check; 150 studies of three runs of about 400 independent samples.

    More than the 99.9 % point of a binomial distribution would show a higher rate.
    """
    doubted: Counter[str] = Counter()
    for seed in range(150):
        found = findings(combined_from(gamma_runs(2000, 2 / 3, seed)))
        doubted.update({each.check for each in unsound(found)})

    assert set(doubted) <= {"time scales", "transient rules", "transient length", "doubled start"}
    assert max(doubted.values(), default=0) <= binom.ppf(0.999, 150, 0.02)


def test_findings_say_all_that_a_record_needs() -> None:
    combined = combined_from(starting_high(4000, 200.0))
    found = findings(combined)

    assert {each.check for each in found} == {
        "links",
        "far samples",
        "length",
        "slowest times",
        "time scales",
        "transient length",
        "transient rules",
        "doubled start",
    }
    for each in found:
        assert each.offender
        assert each.summary
        assert each.limit_reason
        assert np.isfinite(each.limit)
        assert bool(each.advice) == (each.verdict is not Verdict.SOUND)
    assert findings(combined) == found


def test_a_start_cut_too_early_by_hand_is_seen_by_the_second_rule() -> None:
    found = transient_rules(combined_from(starting_high(4000, 200.0), discard=50))

    assert [each.verdict for each in found] == [Verdict.CAUTION] * 3
    for each in found:
        assert each.found > 2
        assert "starts at row 64" in each.summary  # rounded up to a whole block
        assert "would follow the second rule" in each.advice
    assert not unsound(
        transient_rules(combined_from(starting_high(4000, 200.0)))
    )  # the automatic start is fine


@pytest.mark.parametrize(("discard", "verdict"), [("48 %", Verdict.SOUND), ("55 %", Verdict.CAUTION)])
def test_a_run_of_which_more_than_half_is_left_out_is_doubted(discard: str, verdict: Verdict) -> None:
    found = transient_length(combined_from(gamma_runs(4000, 0.5, 1), discard=discard))

    assert [each.verdict for each in found] == [verdict] * 3
    assert "of its rows as transient" in found[0].summary


def test_a_run_that_drifts_all_along_is_doubted() -> None:
    runs = gamma_runs(4000, 0.5, 1)
    runs["T=1.15"] = runs["T=1.15"] + np.linspace(20, 0, 4000)
    found = findings(combined_from(runs))

    assert {each.check for each in unsound(found) if each.offender == "T=1.15"} & {
        "transient length",
        "transient rules",
        "slowest times",
    }


def test_doubling_a_start_that_was_too_short_moves_the_answers() -> None:
    (found,) = doubled_start(combined_from(starting_high(4000, 300.0), discard=200))

    assert found.verdict is Verdict.CAUTION
    assert found.found > found.limit >= 1
    assert "leaving out twice as much" in found.summary
    assert found.advice


def test_doubling_a_start_that_is_forgotten_moves_nothing() -> None:
    (found,) = doubled_start(combined_from(starting_high(20_000, 50.0), discard=1000))

    assert found.verdict is Verdict.SOUND
    assert 0 < found.found < 1


def test_the_shift_is_that_of_combining_again_with_twice_the_start() -> None:
    """Not estimated: the same as a second study, to solver accuracy where weights do not depend on the start."""
    runs = starting_high(4096, 300.0)
    combined = combined_from(runs, discard=256, weighting="samples")
    again = combined_from(runs, discard=512, weighting="samples")
    (found,) = doubled_start(combined)

    one, other = (rw.curve(each, TEMPERATURES, beyond_reach=True) for each in (combined, again))
    shifts = {
        f"{one[name].attrs['long_name']} at {temperature:g}": float(
            np.abs(other[name] - one[name])[place] / one[f"{name}_standard_error"][place]
        )
        for name in ("mean_energy", "heat_capacity")
        for place, temperature in enumerate(TEMPERATURES)
    }
    assert found.found == pytest.approx(shifts[found.offender], rel=1e-6)
    assert found.found > 0.8 * max(shifts.values())  # what chance explains is allowed for, answer by answer


def test_nothing_left_out_is_nothing_to_double() -> None:
    assert doubled_start(combined_from(gamma_runs(2000, 0.5, 1), discard=0)) == []


def test_a_start_of_a_third_may_move_answers_by_chance() -> None:
    """Stationary runs, of which twice a third is left out: shifts of 0.7 standard errors are expected, 2.1 allowed."""
    doubted = [
        unsound(doubled_start(combined_from(gamma_runs(2000, 0.5, seed), discard="33 %")))
        for seed in range(60)
    ]

    assert sum(map(bool, doubted)) <= binom.ppf(0.999, 60, 0.02)


def with_slow_part(share: float, rows: int) -> dict[str, np.ndarray]:
    rng = np.random.default_rng(62)
    return {
        f"T={t}": SHAPE * t
        + np.sqrt(SHAPE)
        * t
        * (
            np.sqrt(1 - share) * correlated_normals(rows, 0.7, rng)
            + np.sqrt(share) * correlated_normals(rows, 0.99, rng)
        )
        for t in TEMPERATURES
    }


def test_a_slow_process_behind_a_fast_one_is_found_in_all_runs_together() -> None:
    found = two_time_scales(combined_from(with_slow_part(0.05, 15_000), discard=0))

    assert [(each.offender, each.verdict) for each in found] == [("all runs", Verdict.CAUTION)]
    assert found[0].found > 1.5
    assert found[0].found_standard_error == pytest.approx(found[0].found * np.sqrt(8 / 117 / 3), rel=0.05)
    assert "slow process hides behind fast ones" in found[0].advice


def test_a_slow_process_in_one_run_alone_is_found_there() -> None:
    runs = gamma_runs(15_000, 0.7, 5)
    rng = np.random.default_rng(63)
    slow = correlated_normals(15_000, 0.997, rng)
    runs["T=1.3"] = draw_gamma(SHAPE, 1.3, 15_000, rng) + 2.5 * slow

    found = two_time_scales(combined_from(runs, discard=0))

    assert [(each.offender, each.verdict) for each in found] == [("T=1.3", Verdict.CAUTION)]


def test_a_slow_observable_counts_among_the_slowest_times() -> None:
    rng = np.random.default_rng(64)
    runs = {
        name: {"energy": run, "shape": correlated_normals(4000, 0.995, rng)}
        for name, run in gamma_runs(4000, 0.5, 1).items()
    }
    combined = combined_from(runs, discard=0)

    assert not unsound(length(combined))
    found = slowest_times(combined)
    assert [each.verdict for each in found] == [Verdict.CAUTION] * 3  # g = 399: 10 times
    assert all("(shape)" in each.summary and "times as long" in each.advice for each in found)


def test_a_frozen_observable_is_no_slow_process() -> None:
    runs = {
        name: {"energy": run, "charge": np.full(4000, 2.0)} for name, run in gamma_runs(4000, 0.5, 1).items()
    }

    assert worst(findings(combined_from(runs, discard=0))) is Verdict.SOUND


def test_runs_too_short_by_the_slower_estimate_are_doubted() -> None:
    found = length(combined_from(gamma_runs(1000, 0.9, 1), discard=0))

    assert [each.verdict for each in found] == [Verdict.CAUTION] * 3
    assert all(30 < each.found < 100 for each in found)


def test_a_constant_run_and_a_wild_first_sample_do_not_break_a_check() -> None:
    runs = gamma_runs(2000, 0.5, 1)
    runs["T=1.0"] = np.full(2000, 30.0)
    runs["T=1.3"][0] = 1e9

    found = findings(combined_from(runs))

    assert {each.offender for each in unsound(found) if each.check == "length"} == {"T=1.0"}
    assert all(np.isfinite(each.found) for each in found)
