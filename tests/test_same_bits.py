"""The same bits, however the rows arrive: chunk size, number of workers, one sitting or several, saved or not.

Judged by equality of every byte of the tallies and of every number of a curve and a peak.  Runs are long enough that
leaves are made (65,536 rows), doubled (131,072 rows) and left unfinished; wide runs are those whose rows are kept.
"""

from __future__ import annotations

import copy
import dataclasses
from collections.abc import Callable, Iterator, Sequence
from pathlib import Path

import numpy as np
import pytest
import xarray as xr
from numpy.typing import NDArray

import reweight as rw
from reweight.combining import combine_sources
from reweight.density_of_states import Description, ObservableDescription
from reweight.runs import Source
from reweight.tally.levels import Spacing
from reweight.tally.nodes import COUNT, Column, Nodes
from reweight.tally.run_tally import RunTally

Rows = NDArray[np.float64]

LONG = 150_001
TEMPERATURES = {"narrow": 1.0, "wide": 1.15}
MOMENTS = (
    COUNT,
    Column("m", 1),
    Column("m", 2),
    Column("m", 1, absolute=True),
    Column("m", above=0.1),
)


def continuous(rng: np.random.Generator, length: int = LONG) -> dict[str, Rows]:
    """Energies and an observable of a run that becomes leaves, and of one so much wider that its rows are kept."""
    narrow = rng.gamma(50.0, 1.0, length)
    wide = 100 * rng.standard_normal(length) + 55.0
    return {
        name: np.stack([energies, energies**0.5 * rng.standard_normal(length)], axis=1)
        for name, energies in (("narrow", narrow), ("wide", np.abs(wide)))
    }


def lattice(rng: np.random.Generator, length: int = LONG) -> dict[str, Rows]:
    """Few levels, blurred by rounding errors of a file with energies per site: they are snapped to a grid."""
    return {
        name: np.stack(
            [
                -4 * rng.binomial(64, p, length) + rng.uniform(-1e-5, 1e-5, length),
                rng.standard_normal(length),
            ],
            axis=1,
        )
        for name, p in (("narrow", 0.7), ("wide", 0.65))
    }


def combined_from(
    runs: dict[str, Rows], chunk: int | None, workers: int, discard: int | str = "auto"
) -> rw.DensityOfStates:
    def chunks(rows: Rows) -> Callable[[], Iterator[Rows]]:
        size = chunk or rows.shape[0]
        return lambda: (rows[start : start + size].copy() for start in range(0, rows.shape[0], size))

    sources = [
        Source(name=name, beta=1 / TEMPERATURES[name], chunks=chunks(rows), discard=discard)
        for name, rows in runs.items()
    ]
    observable = ObservableDescription(name="m", moments=(1, 2), absolute=True)
    return combine_sources(sources, Description(observables=(observable,)), workers=workers)


def arrays_of(tally: RunTally) -> dict[str, NDArray]:
    arrays: dict[str, NDArray] = {"rows": np.array(tally.row_count), "tail": tally.tail}
    if tally.leaves is not None:
        arrays |= {f"leaves {name}": getattr(tally.leaves, name) for name in ("keys", "sums", "rows")}
        arrays |= {
            f"thinned {name}": np.asarray(getattr(tally.thinned, name))
            for name in ("group", "origin", "sums", "squares")
        }
    return arrays


def assert_same_bits(one: RunTally, other: RunTally) -> None:
    assert one.nodes == other.nodes
    first, second = arrays_of(one), arrays_of(other)
    assert first.keys() == second.keys()
    for name, array in first.items():
        assert array.dtype == second[name].dtype, name
        assert array.shape == second[name].shape, name
        same = array.tobytes() == second[name].tobytes()
        assert same, name  # a plain truth value: pytest would take minutes to explain how megabytes differ


def assert_answers_same_bits(one: rw.DensityOfStates, other: rw.DensityOfStates) -> None:
    for run, twin in zip(one.runs, other.runs, strict=True):
        assert_same_bits(run.tally, twin.tally)
        assert dataclasses.astuple(run.decision) == dataclasses.astuple(twin.decision)
    for name in ("free_energies", "log_denominator", "probabilities"):
        same = (
            getattr(one.estimate.solution, name).tobytes() == getattr(other.estimate.solution, name).tobytes()
        )
        assert same, name
    asked = {"temperature": np.linspace(0.98, 1.17, 7), "beyond_reach": True}
    xr.testing.assert_identical(rw.curve(one, **asked), rw.curve(other, **asked))
    limits = {"lowest": 0.98, "highest": 1.17, "beyond_reach": True}
    # As text, so that the NaN of a peak at the edge equals itself; repr keeps every bit.
    assert list(map(repr, rw.peaks(one, **limits))) == list(map(repr, rw.peaks(other, **limits)))


@pytest.mark.parametrize("make", [continuous, lattice])
def test_one_row_at_a_time_gives_the_same_bits_as_all_at_once(make: Callable[..., dict[str, Rows]]) -> None:
    runs = make(np.random.default_rng(1), 5000)

    assert_answers_same_bits(combined_from(runs, None, 2), combined_from(runs, 1, 2))


@pytest.mark.parametrize("make", [continuous, lattice])
@pytest.mark.parametrize(("chunk", "workers"), [(1000, 1), (8192, 2), (70_000, 1), (None, 1)])
def test_chunk_size_and_workers_change_no_bit_of_long_runs(
    make: Callable[..., dict[str, Rows]], chunk: int | None, workers: int
) -> None:
    runs = make(np.random.default_rng(2))
    one = combined_from(runs, None, 2)
    other = combined_from(runs, chunk, workers)

    assert one.runs[0].tally.leaves is not None  # else the leaves are not what is compared
    if make is continuous:
        assert one.runs[1].tally.leaves is None  # rows are kept
    else:
        assert one.runs[0].tally.nodes.spacing is not None
    assert_answers_same_bits(one, other)


@pytest.mark.parametrize("make", [continuous, lattice])
def test_a_saved_file_is_opened_again_bit_for_bit(
    make: Callable[..., dict[str, Rows]], tmp_path: Path
) -> None:
    combined = combined_from(make(np.random.default_rng(3)), 9000, 2)

    rw.save(combined, tmp_path / "saved.nc")

    assert_answers_same_bits(combined, rw.open_combined(tmp_path / "saved.nc"))


def narrow_nodes() -> tuple[Nodes, Rows]:
    """Leaves from the first batch on."""
    return Nodes(2.0), continuous(np.random.default_rng(4), 220_000)["narrow"]


def wide_nodes() -> tuple[Nodes, Rows]:
    """Rows are kept up to 262,144 of them, where leaves of a longer batch are made."""
    return Nodes(0.5), continuous(np.random.default_rng(5), 300_000)["narrow"] * [1.5, 1.0]


def snapped_nodes() -> tuple[Nodes, Rows]:
    """Levels behind rounding errors."""
    rows = lattice(np.random.default_rng(6))["narrow"]
    return Nodes(0.5, discrete=True, spacing=Spacing(offset=-256.0, step=4.0, largest_shift=1e-5)), rows


def overflowing_nodes() -> tuple[Nodes, Rows]:
    """Few levels for a batch, then so many that they are poured into panels in the midst of the run.

    The many are too many for two batches, yet few enough for a run of this whole length: what has not been absorbed
    must not count.
    """
    rng = np.random.default_rng(7)
    energies = np.concatenate([rng.integers(0, 500, 65_536) / 8, rng.integers(0, 80_000, 130_000) / 1024])
    return Nodes(2.0, discrete=True), energies[:, None]


NODES = [narrow_nodes, wide_nodes, snapped_nodes, overflowing_nodes]


def tallied(nodes: Nodes, pieces: Sequence[Rows]) -> RunTally:
    with_observable = pieces[0].shape[1] > 1
    tally = RunTally(nodes, MOMENTS if with_observable else (COUNT,), ["m"] if with_observable else [])
    for rows in pieces:
        tally.add(rows)
    return tally


def put_away_and_continued(tally: RunTally) -> RunTally:
    return RunTally.restored(
        tally.nodes,
        tally.columns,
        tally.observables,
        tail=tally.tail.copy(),
        leaves=copy.deepcopy(tally.leaves),
        thinned=copy.deepcopy(tally.thinned),
    )


@pytest.mark.parametrize("make", NODES)
def test_the_tallies_of_these_tests_reach_the_stages_they_are_made_for(
    make: Callable[[], tuple[Nodes, Rows]],
) -> None:
    nodes, rows = make()
    tally = tallied(nodes, [rows])

    assert tally.leaves is not None
    assert tally.tail.shape[0] > 0
    assert tally.nodes.discrete == (make is snapped_nodes)
    if make is wide_nodes:
        assert tallied(nodes, [rows[:140_000]]).leaves is None
        assert tally.leaves.rows[0] == 262_144 // 64


@pytest.mark.parametrize("make", NODES)
@pytest.mark.parametrize("chunk", [1000, 65_536, 140_000])
def test_a_tally_has_the_same_bits_for_every_chunk_size(
    make: Callable[[], tuple[Nodes, Rows]], chunk: int
) -> None:
    nodes, rows = make()

    pieces = [rows[start : start + chunk] for start in range(0, rows.shape[0], chunk)]

    assert_same_bits(tallied(nodes, [rows]), tallied(nodes, pieces))


@pytest.mark.parametrize("make", NODES)
@pytest.mark.parametrize("cut", [1, 65_536, 140_123])
def test_a_run_tallied_in_two_sittings_has_the_same_bits(
    make: Callable[[], tuple[Nodes, Rows]], cut: int
) -> None:
    nodes, rows = make()
    at_once = tallied(nodes, [rows])

    tally = put_away_and_continued(tallied(nodes, [rows[:cut]]))
    tally.add(rows[cut:])

    assert_same_bits(at_once, tally)
    for one, other in zip(at_once.complete(), tally.complete(), strict=True):
        for field in dataclasses.fields(one):
            assert np.array_equal(getattr(one, field.name), getattr(other, field.name))


def test_a_run_tallied_in_many_sittings_has_the_same_bits() -> None:
    nodes, rows = narrow_nodes()

    tally = tallied(nodes, [rows[:100]])
    for start in range(100, rows.shape[0], 33_333):
        tally = put_away_and_continued(tally)
        tally.add(rows[start : start + 33_333])

    assert_same_bits(tallied(nodes, [rows]), tally)


def test_completing_a_tally_does_not_change_it() -> None:
    nodes, rows = narrow_nodes()
    tally = tallied(nodes, [rows[:70_000]])

    tally.complete()
    tally.add(rows[70_000:])

    assert_same_bits(tallied(nodes, [rows]), tally)


def test_another_order_of_the_rows_does_change_bits() -> None:
    """Negative control: the same rows in another order inside one leaf give other sums, and the comparison sees it."""
    nodes, rows = narrow_nodes()
    other = rows.copy()
    other[:1024] = rows[:1024][::-1]
    one, two = tallied(nodes, [rows]), tallied(nodes, [other])

    np.testing.assert_allclose(one.leaves.sums, two.leaves.sums, rtol=1e-9, atol=1e-9)
    with pytest.raises(AssertionError, match="leaves sums"):
        assert_same_bits(one, two)
