"""Outputs of commands: whole or not at all, and never in the place of an input."""

from __future__ import annotations

import errno
import resource
import shutil
import signal
import subprocess
import sys
from contextlib import contextmanager
from pathlib import Path

import pytest

import reweight.cli

WRITERS = {
    "curve --csv": ("curve", "FILE", "--points", "5", "--csv"),
    "curve --covariance": ("curve", "FILE", "--points", "5", "--covariance"),
    "curve --save-resamples": (
        *("curve", "FILE", "--points", "5", "--errors", "bootstrap", "--resamples", "20"),
        "--save-resamples",
    ),
    "peak --csv": ("peak", "FILE", "--resamples", "20", "--csv"),
    "crossing --csv": ("crossing", "FILE", "--of", "energy", "--equals", "77", "--csv"),
    "states --csv": ("states", "FILE", "--csv"),
    "distribution --csv": ("distribution", "FILE", "--at", "315", "--csv"),
}
PICTURES = {
    "curve --plot": ("curve", "FILE", "--points", "5", "--plot"),
    "states --plot": ("states", "FILE", "--plot"),
    "distribution --plot": ("distribution", "FILE", "--at", "315", "--plot"),
    "runs --plot": ("runs", "FILE", "--plot"),
    "runs of a study --plot": ("runs", "STUDY", "--plot"),
}
EVERY = {**WRITERS, **PICTURES}


def asked(name: str, combined: Path, target: Path) -> list[str]:
    places = {"FILE": str(combined), "STUDY": str(combined.with_suffix(".toml"))}
    return [*(places.get(each, each) for each in EVERY[name]), str(target)]


@contextmanager
def files_of_at_most(size: int):
    """As on a disk that is nearly full: a write beyond the limit fails."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


@pytest.mark.parametrize("name", EVERY)
def test_a_name_that_is_taken_is_refused_before_any_work(name, combined, reweight, monkeypatch):
    target = combined.parent / "kept.svg"
    target.write_text("dear to somebody")
    for work in ("curve.curve", "peak.peaks", "crossing.crossings", "states.states"):
        monkeypatch.setattr(f"reweight.answers.{work}", None)  # would fail in another way

    outcome = reweight(*asked(name, combined, target))

    assert outcome.status == 2, outcome.stderr
    assert "--force" in outcome.stderr
    assert target.read_text() == "dear to somebody"


@pytest.mark.parametrize("name", EVERY)
def test_an_input_is_never_replaced_even_by_force_and_wherever_a_copy_lies(name, combined, reweight):
    elsewhere = combined.parent / "elsewhere"
    elsewhere.mkdir()
    copies = [elsewhere / "data.svg", elsewhere / "study.svg"]
    shutil.copy(combined.parent / "cold.dat", copies[0])
    shutil.copy(combined.parent / "study.toml", copies[1])
    if name.startswith("runs of a study"):
        copies = [combined.parent / "cold.svg"]
        (combined.parent / "cold.dat").rename(copies[0])
        study = combined.with_suffix(".toml")
        study.write_text(study.read_text().replace("cold.dat", "cold.svg"))
    for copy in copies:
        before = copy.read_bytes()
        outcome = reweight(*asked(name, combined, copy), "--force")
        assert outcome.status == 2, outcome.stderr
        assert "must not replace an input" in outcome.stderr
        assert copy.read_bytes() == before


def test_two_outputs_of_one_name_are_refused(combined, reweight):
    target = combined.parent / "both.svg"
    outcome = reweight("states", combined, "--csv", target, "--plot", target)
    assert outcome.status == 2
    assert "a name of its own" in outcome.stderr
    assert not target.exists()


@pytest.mark.parametrize("name", EVERY)
def test_a_full_disk_is_one_message_and_leaves_nothing(name, combined, reweight):
    reweight(*asked(name, combined, combined.parent / "warm.svg"))  # caches are written now
    before = sorted(combined.parent.iterdir())

    with files_of_at_most(64):
        outcome = reweight(*asked(name, combined, combined.parent / "new.svg"))

    assert outcome.status == 2, outcome.stderr
    assert outcome.stderr.count("needs more room than is left") == 1
    assert "Traceback" not in outcome.stderr
    assert sorted(combined.parent.iterdir()) == before


def test_a_full_disk_under_a_combined_file_leaves_the_old_one(study, reweight):
    target = study.with_suffix(".nc")
    target.write_bytes(b"the old one")
    with files_of_at_most(10_000):
        outcome = reweight("combine", study, "--force")
    assert outcome.status == 2, outcome.stderr
    assert "needs more room than is left" in outcome.stderr
    assert target.read_bytes() == b"the old one"
    assert not list(study.parent.glob(".reweight-*"))


def test_a_folder_that_cannot_be_written_is_one_message(combined, reweight, monkeypatch):
    def denied(*_arguments):
        raise PermissionError(errno.EACCES, "Permission denied")

    monkeypatch.setattr("reweight.files.os.open", denied)  # file modes do not bind the administrator
    outcome = reweight(*asked("curve --csv", combined, combined.parent / "new.csv"))
    assert outcome.status == 2
    assert (
        "must be writable; the system says: Permission denied. Choose another name or folder"
        in outcome.stderr
    )


def test_an_answer_that_cannot_be_printed_is_one_message(combined):
    program = Path(sys.executable).with_name("reweight")
    with open("/dev/full", "w") as full:
        done = subprocess.run(
            [program, "curve", combined], stdout=full, stderr=subprocess.PIPE, text=True, check=False
        )
    assert done.returncode == 2
    assert done.stderr == (
        "reweight: the answer cannot be printed; the system says: No space left on device. Free some space.\n"
    )


def test_an_interruption_leaves_nothing_behind(study, reweight, monkeypatch):
    def interrupted(*_arguments):
        raise KeyboardInterrupt

    before = sorted(study.parent.iterdir())
    monkeypatch.setattr("reweight.saving._write", interrupted)
    outcome = reweight("combine", study)
    assert (outcome.status, outcome.stdout) == (130, "")
    assert outcome.stderr.strip() == "reweight: interrupted; no file was left unfinished"
    assert sorted(study.parent.iterdir()) == before


@pytest.mark.parametrize("accident", [KeyboardInterrupt, RuntimeError])
def test_an_unfinished_demo_leaves_no_folder(tmp_path, reweight, monkeypatch, accident):
    def ended(_folder):
        raise accident

    monkeypatch.setattr("reweight.cli.demo._whole_job", ended)
    assert reweight("demo", tmp_path / "demo").status in (1, 130)
    assert list(tmp_path.iterdir()) == []


def test_the_installed_command_says_in_one_line_that_it_was_interrupted_early(monkeypatch, capsys):
    def interrupted():
        raise KeyboardInterrupt

    before = signal.getsignal(signal.SIGINT)
    monkeypatch.setattr("reweight.cli.application.main", interrupted)
    try:
        with pytest.raises(SystemExit) as ended:
            reweight.cli.main()
    finally:
        signal.signal(signal.SIGINT, before)
    assert ended.value.code == 130
    assert capsys.readouterr().err == "reweight: interrupted\n"
