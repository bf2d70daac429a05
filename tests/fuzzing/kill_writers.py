"""Every command that writes is killed at random moments: the old file or the whole new one must be there, never a part.

    python tests/fuzzing/kill_writers.py --kills 200 --interrupts 200 --seed 1

Equal inputs give equal bytes, so what an undisturbed command writes is known, and a file is whole if it is equal to that.
A quarter of the commands are started as a user does, the others in a process that has imported everything already, so
that more signals meet the work itself.  Half of the signals come at any moment of the command's life, half within 30
milliseconds of the moment at which it has begun to write (the new file is seen beside its final name).
"""

from __future__ import annotations

import argparse
import os
import random
import shutil
import signal
import subprocess
import sys
import time
import traceback
from collections import Counter
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from tempfile import TemporaryDirectory

import matplotlib.figure
import netCDF4
import pandas
import xarray

import reweight.cli
import reweight.cli.application
from reweight.datasets import shipped

__all__ = ["WRITERS"]

OLD = b"an old file, dear to somebody\n"
BESIDE = ".reweight-"
PROGRAM = str(Path(sys.executable).with_name("reweight"))
Contents = Mapping[str, bytes]
IMPORTED = (
    matplotlib.figure,
    netCDF4,
    pandas,
    xarray,
    reweight.cli.application,
)  # before any process is split off


@dataclass(frozen=True)
class Writer:
    """A command line in a folder with ``study.toml`` and ``made.nc``, and what it writes there."""

    arguments: tuple[str, ...]
    targets: tuple[str, ...]


WRITERS = (
    Writer(("combine", "study.toml", "-o", "out.nc", "--force"), ("out.nc",)),
    Writer(("curve", "made.nc", "--csv", "out.csv", "--force"), ("out.csv",)),
    Writer(("curve", "made.nc", "--covariance", "out.csv", "--points", "5", "--force"), ("out.csv",)),
    Writer(("curve", "made.nc", "--plot", "out.pdf", "--force"), ("out.pdf",)),
    Writer(
        (
            "curve",
            "made.nc",
            "--errors",
            "bootstrap",
            "--resamples",
            "100",
            "--save-resamples",
            "out.nc",
            "--force",
        ),
        ("out.nc",),
    ),
    Writer(("peak", "made.nc", "--resamples", "50", "--csv", "out.csv", "--force"), ("out.csv",)),
    Writer(
        ("crossing", "made.nc", "--of", "energy", "--equals", "20", "--csv", "out.csv", "--force"),
        ("out.csv",),
    ),
    Writer(("states", "made.nc", "--csv", "out.csv", "--plot", "out.svg", "--force"), ("out.csv", "out.svg")),
    Writer(("distribution", "made.nc", "--at", "350", "--csv", "out.csv", "--force"), ("out.csv",)),
    Writer(("runs", "study.toml", "--plot", "out.png", "--force"), ("out.png",)),
    Writer(("demo", "demo"), ()),
)


def contents(folder: Path) -> dict[str, bytes]:
    """Every file below a folder."""
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


def restore(folder: Path, wanted: Contents) -> None:
    """Make a folder hold these files again and no others."""
    shutil.rmtree(folder, ignore_errors=True)
    for name, data in wanted.items():
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_bytes(data)


def started(folder: Path, arguments: Sequence[str], errors: Path, *, fresh: bool) -> int:
    """Start a command and return the number of its process."""
    process = os.fork()
    if process:
        return process
    status = 1
    try:
        os.chdir(folder)
        os.dup2(os.open(os.devnull, os.O_WRONLY), 1)
        os.dup2(os.open(errors, os.O_WRONLY | os.O_CREAT | os.O_TRUNC), 2)
        if fresh:
            os.execv(PROGRAM, [PROGRAM, *arguments])  # noqa: S606  # the installed command
        sys.argv = [PROGRAM, *arguments]
        reweight.cli.main()
    except SystemExit as ended:
        status = int(ended.code or 0)
    except BaseException:
        traceback.print_exc()
    finally:
        sys.stderr.flush()
        os._exit(status)


def ended(process: int) -> int | None:
    """Status of a process as :mod:`subprocess` gives it, None if it still runs."""
    found, status = os.waitpid(process, os.WNOHANG)
    return os.waitstatus_to_exitcode(status) if found else None


def disturbed(
    folder: Path,
    arguments: Sequence[str],
    number: signal.Signals,
    lasting: float,
    rng: random.Random,
    *,
    fresh: bool,
) -> tuple[int, str]:
    """Run a command, send it a signal at some moment, and return its status and what it said of errors."""
    errors = folder.with_name("errors.txt")
    process = started(folder, arguments, errors, fresh=fresh)
    moment = time.monotonic() + rng.uniform(0, lasting)
    until_written = rng.random() < 0.5
    while (status := ended(process)) is None:
        if until_written and any(path.name.startswith(BESIDE) for path in folder.iterdir()):
            until_written, moment = False, time.monotonic() + rng.uniform(0, 0.03)
        if not until_written and time.monotonic() >= moment:
            os.kill(process, number)
            status = os.waitstatus_to_exitcode(os.waitpid(process, 0)[1])
            break
        time.sleep(0.0005)
    return status, errors.read_text(errors="replace")


def judged(
    before: Contents, after: Contents, done: Contents, *, interrupted: bool, found: Counter[str]
) -> list[str]:
    """Faults of what a disturbed command left behind."""
    faults = []
    for name, data in after.items():
        if BESIDE in name:
            if interrupted:
                faults.append(f"{name} left behind")
            found["left beside a name"] += 1
        elif data not in (before.get(name), done.get(name)):
            faults.append(f"{name} is neither the old file nor the whole new one")
    faults += [f"{name} is lost" for name in before if name not in after]
    new = {name for name in after if name not in before and BESIDE not in name}
    if interrupted and new and new != set(done) - set(before):
        faults.append(f"only a part of the new files is there: {sorted(new)}")
    found[
        "new file" if any(after.get(name) == done[name] != before.get(name) for name in done) else "old file"
    ] += 1
    return faults


def trials(
    count: int, number: signal.Signals, folder: Path, before: Contents, rng: random.Random
) -> list[str]:
    """Disturb all commands in turn, so many times in all; print and return the faults."""
    undisturbed = {}
    for fresh in (True, False):
        for writer in WRITERS:
            restore(folder, {**before, **dict.fromkeys(writer.targets, OLD)})
            beginning = time.monotonic()
            process = started(folder, writer.arguments, folder.with_name("errors.txt"), fresh=fresh)
            status = os.waitstatus_to_exitcode(os.waitpid(process, 0)[1])
            assert status in (0, 3), folder.with_name("errors.txt").read_text()
            undisturbed[writer, fresh] = (time.monotonic() - beginning, contents(folder))
    found: Counter[str] = Counter()
    faults = []
    for trial in range(count):
        writer = WRITERS[trial % len(WRITERS)]
        fresh = trial // len(WRITERS) % 4 == 0
        lasting, done = undisturbed[writer, fresh]
        old = {**before, **dict.fromkeys(writer.targets, OLD)}
        restore(folder, old)
        status, said = disturbed(folder, writer.arguments, number, lasting, rng, fresh=fresh)
        found[f"status {status}"] += 1
        interrupted = number == signal.SIGINT
        here = judged(old, contents(folder), done, interrupted=interrupted, found=found)
        if "Traceback" in said:
            if "reweight/" in said or "reweight\\" in said:
                here.append(f"traceback:\n{said}")
            found["ended before the program's first line"] += 1
        faults += [f"{' '.join(writer.arguments)}: {each}" for each in here]
    if count and found["status 0"] == count:
        faults.append("no signal arrived in time: nothing was tried")
    print(f"{count} times {number.name}: {len(faults)} faults; {dict(sorted(found.items()))}", flush=True)
    for each in faults:
        print(each)
    return faults


def main() -> int:
    """Run the trials and print the figures."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--kills", type=int, default=200)
    parser.add_argument("--interrupts", type=int, default=200)
    parser.add_argument("--seed", type=int, default=1)
    given = parser.parse_args()
    # A shell starts programs in the background with interrupts ignored, and what they start inherits that.
    signal.signal(signal.SIGINT, signal.default_int_handler)
    rng = random.Random(given.seed)  # noqa: S311  # moments, not secrets
    with TemporaryDirectory() as name:
        folder = Path(name) / "work"
        shutil.copytree(shipped("bead-chain"), folder)
        subprocess.run(
            [PROGRAM, "combine", "study.toml", "-o", "made.nc"], cwd=folder, check=False, capture_output=True
        )
        before = contents(folder)
        faults = trials(given.kills, signal.SIGKILL, folder, before, rng)
        faults += trials(given.interrupts, signal.SIGINT, folder, before, rng)
    return 1 if faults else 0


if __name__ == "__main__":
    sys.exit(main())
