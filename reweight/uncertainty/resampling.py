r"""Block bootstrap: the whole estimate again from leaves drawn with replacement.

Circular moving blocks (H. R. Kuensch, Ann. Statist. 17, 1217 (1989); D. N. Politis and J. P. Romano (1992); both from
memory): in every run, blocks of consecutive leaves, at least five times as long as its statistical inefficiency, are drawn
from uniform starts, wrapping round, until they make up a run of the old length.  Each resample is solved again by Newton's
method from the full solution, and answers every question anew; the cost does not depend on the number of samples.

Everything is taken relative to the full solution.  With ``P_iq`` its probabilities, n*_i the weight of run i in a resample
and d_i the shift of its free energy, ``D* / D = sum_i a_i P_iq`` with ``a_i = n*_i / n_i exp(d_i)``, so that all a resample
needs to be remembered by are its multiplicities and the K numbers a_i; canonical weights of the full solution then serve
all resamples at once.

A resample tells the shape of the errors: bias, asymmetry, several maxima.  Its scale is a few per cent low, by
``(1 - g / 2 l)(1 - l / B)`` for blocks of length l in a run of length B, and comes from linear response instead.

Shape letters: R resamples, r of them at a time, K runs, B leaves of a run, Q nodes, T temperatures.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reweight.errors import InputError, TooShortError
from reweight.estimate import Canonical, Estimate
from reweight.multistate import reference_run
from reweight.products import product
from reweight.quantities.moments import Moment, Moments
from reweight.quantities.quantity import Quantity
from reweight.tally.nodes import COUNT, Column

__all__ = ["FEWEST_BLOCKS", "Resamples", "block_leaves", "block_sensitivity", "resample", "resampled_values"]

Array = NDArray[np.float64]

LENGTHS = 5.0  # statistical inefficiencies a block
FEWEST_BLOCKS = 5
DECREMENT = 1e-3  # standard errors; a resample is only one draw of many
MOST_STEPS = 12
LONGEST_STEP = 5.0
AT_ONCE = 2**20  # resamples times nodes held in memory
PAIRS_AT_ONCE = 2**22  # products of probabilities held in memory


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Resamples:
    """Resamples of the runs' leaves, and the solution of each.

    Attributes
    ----------
    estimate : Estimate
        The full estimate they were drawn from.
    seed : int
    block_lengths : numpy.ndarray, shape (K,)
        In leaves.
    multiplicities : tuple of numpy.ndarray, shape (R, B)
        How often each leaf of each run was drawn.
    factors : numpy.ndarray, shape (R, K)
        The numbers ``a_i``; NaN for a resample without a solution.
    disconnected : numpy.ndarray of bool, shape (R,)
        Resamples in which some runs share less than one independent sample with the others, or which have no solution.
    """

    estimate: Estimate
    seed: int
    block_lengths: NDArray[np.int64]
    multiplicities: tuple[NDArray[np.int16], ...]
    factors: Array
    disconnected: NDArray[np.bool_]

    @property
    def count(self) -> int:
        """Resamples drawn."""
        return int(self.factors.shape[0])

    def pieces(self) -> list[slice]:
        """Resamples held in memory at a time."""
        return _pieces(self.estimate, self.count)

    def weights(self, columns: Iterable[Column], here: slice) -> dict[Column, Array]:
        """Node weights of tallied columns in some resamples, divided by ``D* / D``, shape (r, Q) each."""
        ratio = product(self.factors[here], self.estimate.solution.probabilities)
        return {
            column: drawn_weights(self.estimate, self.multiplicities, column, here) / ratio
            for column in columns
        }


class ResampledMoments(Moments):
    """Moments in several resamples, shape (r, T), about the full estimate's mean energies."""

    def __init__(self, canonical: Canonical, boltzmann_constant: float, weights: dict[Column, Array]) -> None:
        super().__init__(canonical, boltzmann_constant)
        self._weights = weights
        self._total = product(weights[COUNT], canonical.weights)

    @property
    def log_partition(self) -> Array:
        """``ln Z`` for energies relative to the reference, up to a common constant."""
        return self.canonical.log_partition + np.log(self._total)

    def average(self, moment: Moment) -> Array:
        """Average of a moment that is one."""
        return (
            product(self._weights[moment.column], self.canonical.weighted_power(moment.power)) / self._total
        )


def _pieces(estimate: Estimate, count: int) -> list[slice]:
    size = max(1, AT_ONCE // estimate.energies.size)
    return [slice(start, min(start + size, count)) for start in range(0, count, size)]


def drawn_weights(
    estimate: Estimate, multiplicities: Sequence[NDArray[np.int16]], column: Column, here: slice
) -> Array:
    """Node weights of a tallied column in some resamples, shape (r, Q)."""
    place = estimate.columns.index(column)
    weights = np.zeros((here.stop - here.start, estimate.energies.size))
    for run, drawn in zip(estimate.runs, multiplicities, strict=True):
        sums = product(drawn[here].astype(float), run.sums[place])
        weights[:, run.index] += estimate.assembly.node_weights(sums) / run.weighting
    return weights


def block_leaves(estimate: Estimate, inefficiencies: Array) -> NDArray[np.int64]:
    """Leaves a block, shape (K,): the shortest that are five inefficiencies long."""
    lengths = []
    for run, inefficiency in zip(estimate.runs, inefficiencies, strict=True):
        rows = run.counts[0] * run.weighting  # only the last leaf may be shorter
        lengths.append(max(1, int(np.ceil(LENGTHS * inefficiency / rows - 1e-9))))
    return np.array(lengths)


def resample(
    estimate: Estimate,
    inefficiencies: Array,
    count: int,
    *,
    seed: int = 0,
    coupled: bool = False,
    names: Sequence[str] = (),
    progress: Callable[[int], None] | None = None,
) -> Resamples:
    """Draw resamples and solve each.

    Parameters
    ----------
    estimate : Estimate
    inefficiencies : numpy.ndarray, shape (K,)
        In samples; they set the length of the blocks.
    count : int
    seed : int
    coupled : bool
        The same blocks in all runs, as replica exchange asks for.
    names : sequence of str
        Of the runs, for error messages.
    progress : callable, optional
        Called with the number of resamples just solved.

    Raises
    ------
    TooShortError
        A run is shorter than five blocks.
    InputError
        Fewer than two resamples are asked, or the seed is negative.
    """
    if count < 2:
        raise InputError(f"resamples must be at least 2; got {count}.")
    if seed < 0:
        raise InputError(f"the seed of resamples must not be negative; got {seed}.")
    lengths = block_leaves(estimate, inefficiencies)
    if coupled:
        lengths[:] = lengths.max()
    leaves = [run.counts.size for run in estimate.runs]
    for place, (length, available) in enumerate(zip(lengths, leaves, strict=True)):
        if length * FEWEST_BLOCKS > available:
            blocks = available / length
            name = f" {names[place]!r}" if names else f" {place}"
            raise TooShortError(
                f"resampling needs at least {FEWEST_BLOCKS} blocks of {LENGTHS:g} statistical inefficiencies in every run; "
                f"run{name} has {blocks:.2g}. Sample it longer, or use linear-response errors.",
                run=names[place] if names else "",
            )
    sources = np.random.SeedSequence(seed).spawn(1 if coupled else len(leaves))
    multiplicities = tuple(
        _drawn(np.random.default_rng(sources[0 if coupled else i]), leaves[i], int(lengths[i]), count)
        for i in range(len(leaves))
    )
    pairs = _PairProducts(estimate.solution.probabilities)
    factors = np.empty((count, len(leaves)))
    disconnected = np.empty(count, bool)
    for here in _pieces(estimate, count):
        factors[here], disconnected[here] = _solved(estimate, pairs, multiplicities, here)
        if progress is not None:
            progress(here.stop - here.start)
    return Resamples(
        estimate=estimate,
        seed=seed,
        block_lengths=lengths,
        multiplicities=multiplicities,
        factors=factors,
        disconnected=disconnected,
    )


def _drawn(rng: np.random.Generator, leaves: int, length: int, count: int) -> NDArray[np.int16]:
    """Multiplicities of the leaves, shape (R, B): wrapping blocks from uniform starts, the last one cut."""
    starts = rng.integers(leaves, size=(count, -(-leaves // length)))
    drawn = (starts[:, :, None] + np.arange(length)) % leaves
    drawn = drawn.reshape(count, -1)[:, :leaves] + leaves * np.arange(count)[:, None]
    return np.bincount(drawn.ravel(), minlength=count * leaves).reshape(count, leaves).astype(np.int16)


class _PairProducts:
    """Sums ``sum_q w_q P_iq P_jq`` for many weights w at once, as one matrix product over the pairs i <= j."""

    def __init__(self, probabilities: Array) -> None:
        self.probabilities = probabilities
        self.first, self.second = np.triu_indices(probabilities.shape[0])

    def __call__(self, weights: Array) -> Array:
        """Shape (r, K, K) from shape (r, Q)."""
        runs = self.probabilities.shape[0]
        summed = np.zeros((weights.shape[0], self.first.size))
        step = max(1, PAIRS_AT_ONCE // self.first.size)
        for start in range(0, weights.shape[1], step):
            part = self.probabilities[:, start : start + step]
            summed += product(weights[:, start : start + step], (part[self.first] * part[self.second]).T)
        matrix = np.empty((weights.shape[0], runs, runs))
        matrix[:, self.first, self.second] = summed
        matrix[:, self.second, self.first] = summed
        return matrix


def _solved(
    estimate: Estimate, pairs: _PairProducts, multiplicities: Sequence[NDArray[np.int16]], here: slice
) -> tuple[Array, NDArray[np.bool_]]:
    """Factors of some resamples (r, K), and which are disconnected (r,)."""
    probabilities = estimate.solution.probabilities
    weights = drawn_weights(estimate, multiplicities, COUNT, here)
    counts = np.stack(
        [
            product(drawn[here].astype(float), run.counts[:, None])[:, 0]
            for run, drawn in zip(estimate.runs, multiplicities, strict=True)
        ],
        axis=1,
    )
    factors = counts / estimate.counts
    free = np.arange(estimate.beta.size) != reference_run(estimate.counts)
    converged = np.full(factors.shape[0], not free.any())
    for _ in range(MOST_STEPS):
        ratio = product(factors, probabilities)
        information = pairs(weights / ratio**2) * factors[:, :, None] * factors[:, None, :]
        expected = factors * product(weights / ratio, probabilities.T)
        if converged.all():
            break
        gradient = expected - counts
        hessian = -information
        hessian[:, np.arange(free.size), np.arange(free.size)] += expected
        step, decrement = _newton_step(hessian[:, free][:, :, free], gradient[:, free])
        factors[:, free] *= np.exp(np.where(converged[:, None], 0.0, step))
        converged |= decrement < DECREMENT
    sharing = _least_sharing(information, estimate) * estimate.independent.sum() / estimate.weights[0].sum()
    factors[~converged] = np.nan
    return factors, ~converged | (sharing < 1)


def _newton_step(hessian: Array, gradient: Array) -> tuple[Array, Array]:
    """Steps (r, K - 1), shortened if they are long, and decrements (r,), infinite where there is no step."""
    diagonal = np.einsum("rkk->rk", hessian)
    scale = 1 / np.sqrt(np.maximum(diagonal, np.finfo(float).tiny))
    scaled = hessian * scale[:, :, None] * scale[:, None, :]
    # A disconnected resample makes this singular; the others must not suffer from it.
    scaled += 1e-13 * np.eye(scaled.shape[1])
    step = -scale * np.linalg.solve(scaled, (scale * gradient)[:, :, None])[:, :, 0]
    squared = -(step * gradient).sum(axis=1)
    longest = np.abs(step).max(axis=1, initial=0.0)
    decrement = np.where(longest < LONGEST_STEP, np.sqrt(np.maximum(squared, 0.0)), np.inf)
    return step * np.minimum(1.0, LONGEST_STEP / np.maximum(longest, LONGEST_STEP))[:, None], decrement


def _least_sharing(information: Array, estimate: Estimate) -> Array:
    """Sharing across the weakest cut between neighbouring temperatures, shape (r,); infinite for one run."""
    order = np.argsort(estimate.beta, kind="stable")
    ordered = information[:, order][:, :, order]
    cuts = [ordered[:, :k, k:].sum(axis=(1, 2)) for k in range(1, order.size)]
    return np.min(cuts, axis=0) if cuts else np.full(information.shape[0], np.inf)


def resampled_values(
    resamples: Resamples, quantities: Sequence[Quantity], pieces: Iterable[Moments]
) -> list[Array]:
    """Every quantity in every resample, shape (R, T) each; NaN in resamples without a solution.

    Parameters
    ----------
    resamples : Resamples
    quantities : sequence of Quantity
    pieces : iterable of Moments
        Of the full estimate, at as many temperatures as are held in memory at a time.
    """
    parts: list[list[Array]] = [[] for _ in quantities]
    for moments in pieces:
        size = moments.beta.size
        values = [np.empty((resamples.count, size)) for _ in quantities]
        columns = {COUNT} | {
            moment.column for quantity in quantities for moment in quantity.gradient(moments)
        }
        for here in resamples.pieces():
            resampled = ResampledMoments(
                moments.canonical,
                moments.boltzmann_constant,
                resamples.weights(columns, here),
            )
            for value, quantity in zip(values, quantities, strict=True):
                value[here] = quantity.value(resampled)
        for part, value in zip(parts, values, strict=True):
            part.append(value)
    return [np.concatenate(part, axis=1) for part in parts]


def block_sensitivity(blocks: Sequence[Array], lengths: NDArray[np.int64], *, coupled: bool = False) -> Array:
    """Standard errors from resampling blocks half and twice as long, in units of that from the blocks used, shape (2, T).

    NaN for half where every block is a single leaf, and for twice where a run is not twice as long as a block.

    To first order in the block sums of the influence function, for which resampling need not be done: circular blocks of
    length l give a run the variance ``B / l`` times the mean square sum of l neighbouring leaves.

    Parameters
    ----------
    blocks : sequence of numpy.ndarray, shape (B, T)
        Centred block sums, one array a run.
    lengths : numpy.ndarray, shape (K,)
        Leaves a block.
    coupled : bool
        The same blocks are drawn in all runs.
    """
    if coupled:
        blocks, lengths = [np.sum(blocks, axis=0)], lengths[:1]
    leaves = [block.shape[0] for block in blocks]
    used, half, twice = (
        sum(_circular_variance(block, factor * length) for block, length in zip(blocks, lengths, strict=True))
        for factor in (1.0, 0.5, 2.0)
    )
    ratios = np.array(
        [np.divide(each, used, out=np.ones_like(used), where=used > 0) for each in (half, twice)]
    )
    if np.all(lengths == 1):
        ratios[0] = np.nan
    if np.any(2 * lengths > leaves):
        ratios[1] = np.nan
    return np.asarray(np.sqrt(ratios))


def _circular_variance(blocks: Array, length: float) -> Array:
    count = blocks.shape[0]
    leaves = min(max(1, round(length)), count)
    wrapped = np.concatenate(
        [np.zeros((1, blocks.shape[1])), np.cumsum(np.concatenate([blocks, blocks[: leaves - 1]]), axis=0)]
    )
    sums = wrapped[leaves:] - wrapped[:-leaves]
    return np.asarray(count / leaves * (sums**2).mean(axis=0))
