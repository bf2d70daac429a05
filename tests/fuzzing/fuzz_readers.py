"""Every reader gets files drawn from a grammar and bytes changed at random: only data or our own error may come out.

    python tests/fuzzing/fuzz_readers.py --executions 100000 --seed 1

One execution is one file, read to its end in one block and in small blocks, which must agree; or a sound file, read whole
and cut at a random place, which must give its numbers, or the first of its rows, or be refused.  Batches run in processes of
their own, so that a crash of a library is seen as such, and with a limit on memory.
"""

from __future__ import annotations

import argparse
import hashlib
import resource
import signal
import subprocess
import sys
import time
import warnings
from collections import Counter
from pathlib import Path
from tempfile import TemporaryDirectory
from types import FrameType

import numpy as np
from hypothesis import HealthCheck, Phase, given, seed, settings
from hypothesis import strategies as st
from hypothesis.errors import HypothesisWarning
from numpy.typing import NDArray

from reweight.errors import ReweightError
from reweight.reading import FileLedger, open_table
from reweight.reading.text import TextTable
from reweight.study import Format

sys.path.insert(0, str(Path(__file__).parents[1]))
from fuzzing.grammar import Document, documents, sound_documents  # found by the line above

__all__ = ["read_whole", "refuse_misreading", "refuse_misreading_of_a_part"]

BATCH = 2500
SECONDS = 2.0  # for these small files; 2 s per MB is far more than they take
MEMORY = 4 << 30  # bytes of address space; a declared terabyte must be refused, not asked for


def read_whole(path: Path, declared: Format, *, block_size: int | None = None) -> NDArray[np.float64] | None:
    """Read all columns of a file to its end; None if it was refused by a named error."""
    try:
        table = open_table(path, declared)
        if block_size is not None and isinstance(table, TextTable):
            table = TextTable(path, declared, block_size=block_size)
        ledger = FileLedger(path.name)
        chunks = list(table.chunks(range(len(table.names)), ledger))
    except ReweightError as error:
        if str(path) not in str(error):
            raise AssertionError(f"the file is not named: {error}") from error
        return None
    rows = np.concatenate(chunks) if chunks else np.empty((0, len(table.names)))
    assert np.isfinite(rows).all()
    assert ledger.rows_read == len(rows)
    assert ledger.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()
    return rows


def refuse_misreading(path: Path, document: Document) -> bool:
    """Check one file; return whether it was read."""
    declared = Format.model_validate(document.declared)
    path.write_bytes(document.content)
    rows = read_whole(path, declared)
    again = read_whole(path, declared, block_size=64)
    assert (rows is None) == (again is None), "small blocks end in another way than large ones"
    if rows is None or again is None:
        return False
    np.testing.assert_array_equal(rows, again)
    return True


def refuse_misreading_of_a_part(path: Path, document: Document, length: int) -> bool:
    """Check a sound file, and its beginning: refused, or the first rows as they are; return whether it was read."""
    declared = Format.model_validate(document.declared)
    path.write_bytes(document.content)
    whole = read_whole(path, declared)
    if whole is not None and document.rows is not None:
        np.testing.assert_array_equal(whole, document.rows)
    beginning = path.with_suffix(".part")
    beginning.write_bytes(document.content[:length])
    part = read_whole(beginning, declared)
    if whole is None or part is None:
        return False
    assert len(part) <= len(whole)
    np.testing.assert_array_equal(part, whole[: len(part)])
    return True


def _hang(_number: int, _frame: FrameType | None) -> None:
    raise TimeoutError(f"reading took more than {SECONDS} s")


def _batch(count: int, number: int, path: Path) -> None:
    """Run so many executions and print what came of them, for the parent."""
    resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))
    signal.signal(signal.SIGALRM, _hang)
    warnings.simplefilter("ignore", HypothesisWarning)  # a file is not small when it is printed
    found: Counter[str] = Counter()
    slowest = 0.0

    def timed(check: object, *arguments: object) -> None:
        nonlocal slowest
        signal.setitimer(signal.ITIMER_REAL, 3 * SECONDS)  # each check reads up to three times
        started = time.perf_counter()
        was_read = check(path.with_suffix(f".{sum(found.values())}"), *arguments)  # type: ignore[operator]
        signal.setitimer(signal.ITIMER_REAL, 0)
        slowest = max(slowest, time.perf_counter() - started)
        found["read" if was_read else "refused"] += 1

    def options(executions: int) -> settings:
        return settings(
            max_examples=executions, database=None, deadline=None, phases=[Phase.generate],
            suppress_health_check=list(HealthCheck),
        )  # fmt: skip

    @seed(number)
    @options(count - count // 5)
    @given(documents())
    def spoilt(document: Document) -> None:
        timed(refuse_misreading, document)

    @seed(number)
    @options(count // 5)
    @given(sound_documents(), st.floats(0.0, 1.0))
    def cut(document: Document, share: float) -> None:
        timed(refuse_misreading_of_a_part, document, int(share * len(document.content)))

    path.write_text("1 2\n")
    read_whole(path, Format())  # the libraries are imported now
    spoilt()
    cut()
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(found["read"], found["refused"], f"{slowest:.4f}", f"{peak:.0f}")


def main() -> int:
    """Run all batches and print the figures."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--executions", type=int, default=100_000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--batch", nargs=3, metavar=("COUNT", "SEED", "FILE"), help=argparse.SUPPRESS)
    given_arguments = parser.parse_args()
    if given_arguments.batch:
        count, number, file = given_arguments.batch
        _batch(int(count), int(number), Path(file))
        return 0
    began = time.monotonic()
    total: Counter[str] = Counter()
    slowest = peak = 0.0
    faults = 0
    for batch in range(-(-given_arguments.executions // BATCH)):
        with TemporaryDirectory() as folder:
            number = given_arguments.seed * 1_000_000 + batch
            file = Path(folder) / "data.dat"
            command = [sys.executable, "-W", "error", __file__, "--batch", str(BATCH), str(number), str(file)]
            done = subprocess.run(command, capture_output=True, text=True, timeout=1800, check=False)
            if done.returncode:
                faults += 1
                kept = Path(f"fault-{number}.dat")
                kept.write_bytes(
                    max(Path(folder).iterdir(), key=lambda each: each.stat().st_mtime_ns).read_bytes()
                )
                print(
                    f"batch {number}: status {done.returncode}, last file kept as {kept}\n{done.stderr[-3000:]}"
                )
                continue
            was_read, refused, seconds, memory = done.stdout.split()
            total.update(read=int(was_read), refused=int(refused))
            slowest, peak = max(slowest, float(seconds)), max(peak, float(memory))
            print(f"{batch}: {done.stdout.strip()}", flush=True)
    print(
        f"{sum(total.values())} executions, seed {given_arguments.seed}: {total['read']} read, {total['refused']} refused, "
        f"{faults} faulty batches; slowest {slowest:.3f} s, most memory {peak:.0f} MB; {time.monotonic() - began:.0f} s"
    )
    return 1 if faults else 0


if __name__ == "__main__":
    sys.exit(main())
