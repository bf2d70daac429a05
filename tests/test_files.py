"""Outputs appear whole or not at all, and never cost data."""

import errno
import hashlib
import os
import signal
import stat
import threading

import pytest

from reweight.errors import OutputError
from reweight.files import hash_file, interrupts_wait, replacing, write_text


def listing(folder):
    return sorted(each.name for each in folder.iterdir())


def test_text_is_written_byte_for_byte(tmp_path):
    write_text(tmp_path / "out.csv", "T,E\n1,µ\n")
    assert (tmp_path / "out.csv").read_bytes() == "T,E\n1,µ\n".encode()
    assert listing(tmp_path) == ["out.csv"]


def test_temporary_file_lies_beside_with_the_same_suffix(tmp_path):
    with replacing(tmp_path / "out.svg") as beside:
        assert (beside.parent, beside.suffix) == (tmp_path, ".svg")
        assert not (tmp_path / "out.svg").exists()
        beside.write_text("x")
    assert listing(tmp_path) == ["out.svg"]


def test_mode_follows_the_umask(tmp_path):
    before = os.umask(0o027)
    try:
        write_text(tmp_path / "out", "x")
    finally:
        os.umask(before)
    assert stat.S_IMODE((tmp_path / "out").stat().st_mode) == 0o640


@pytest.mark.parametrize("accident", [RuntimeError, KeyboardInterrupt, SystemExit, GeneratorExit])
def test_accident_leaves_the_old_file_and_nothing_else(tmp_path, accident):
    (tmp_path / "out").write_text("old")

    def work():
        with replacing(tmp_path / "out", force=True) as beside:
            beside.write_text("half")
            raise accident

    with pytest.raises(accident):
        work()
    assert listing(tmp_path) == ["out"]
    assert (tmp_path / "out").read_text() == "old"


def test_existing_file_is_replaced_only_on_request(tmp_path):
    (tmp_path / "out").write_text("old")
    with pytest.raises(OutputError, match=r"a file of that name exists.*--force"):
        write_text(tmp_path / "out", "new")
    assert (tmp_path / "out").read_text() == "old"
    write_text(tmp_path / "out", "new", force=True)
    assert (tmp_path / "out").read_text() == "new"


def test_file_that_appears_meanwhile_is_not_replaced(tmp_path):
    with pytest.raises(OutputError, match="a file of that name exists"), replacing(tmp_path / "out"):
        (tmp_path / "out").write_text("somebody else's")
    assert (tmp_path / "out").read_text() == "somebody else's"
    assert listing(tmp_path) == ["out"]


def test_inputs_are_never_replaced_under_any_name(tmp_path):
    (tmp_path / "data").write_text("samples")
    os.link(tmp_path / "data", tmp_path / "other name")
    for name in ("data", "other name"):
        with pytest.raises(OutputError, match="must not replace an input"):
            write_text(tmp_path / name, "x", force=True, inputs=[tmp_path / "gone", tmp_path / "data"])
    assert (tmp_path / "data").read_text() == "samples"


def test_what_is_no_plain_file_is_refused(tmp_path):
    (tmp_path / "folder").mkdir()
    (tmp_path / "target").write_text("x")
    (tmp_path / "link").symlink_to(tmp_path / "target")
    os.mkfifo(tmp_path / "pipe")
    for name, kind in (("folder", "a folder"), ("link", "a symbolic link"), ("pipe", "a pipe")):
        with pytest.raises(OutputError, match=f"must be a plain file or a new name; got {kind}"):
            write_text(tmp_path / name, "x", force=True)
    with pytest.raises(OutputError, match="got a device"):
        write_text("/dev/null", "x", force=True)


@pytest.mark.parametrize(
    ("name", "message"),
    [("missing/out", "existing folder"), ("", "must be a file name"), ("x" * 300, "must be writable")],
)
def test_impossible_names_are_refused(tmp_path, monkeypatch, name, message):
    monkeypatch.chdir(tmp_path)
    with pytest.raises(OutputError, match=message):
        write_text(name, "x")
    assert listing(tmp_path) == []


def test_read_only_folder_is_refused_before_any_work(tmp_path, monkeypatch):
    def denied(*_arguments):
        raise PermissionError(errno.EACCES, "Permission denied")

    monkeypatch.setattr("reweight.files.os.open", denied)  # file modes do not bind the administrator
    with pytest.raises(OutputError, match="must be writable; the system says: Permission denied"):
        write_text(tmp_path / "out", "x")


def test_full_disk_is_said_in_words_and_leaves_nothing(tmp_path):
    with pytest.raises(OutputError, match="needs more room than is left"), replacing(tmp_path / "out"):
        raise OSError(errno.ENOSPC, "No space left on device")
    assert listing(tmp_path) == []


def test_other_faults_of_the_work_pass_unchanged(tmp_path):
    with pytest.raises(FileNotFoundError, match="an input"), replacing(tmp_path / "out"):
        raise FileNotFoundError(errno.ENOENT, "an input is missing")


def test_readers_see_the_old_or_the_new_file_never_a_part(tmp_path):
    target = tmp_path / "out"
    texts = {letter * 200_000 for letter in "ab"}
    target.write_text(next(iter(texts)))
    seen = set()
    done = threading.Event()

    def watch():
        while not done.is_set():
            seen.add(target.read_text())

    watcher = threading.Thread(target=watch)
    watcher.start()
    for _ in range(10):
        for text in texts:
            write_text(target, text, force=True)
    done.set()
    watcher.join()
    assert seen <= texts


def test_hash_is_that_of_the_bytes(tmp_path):
    (tmp_path / "data").write_bytes(b"abc")
    # FIPS 180-2, appendix B.1 (from memory), and the standard library
    assert hash_file(tmp_path / "data").startswith("ba7816bf")
    assert hash_file(tmp_path / "data") == hashlib.sha256(b"abc").hexdigest()


@pytest.fixture
def interrupts():
    """Interrupts as at a terminal: what is started in the background inherits that they are ignored."""
    before = signal.signal(signal.SIGINT, signal.default_int_handler)
    yield
    signal.signal(signal.SIGINT, before)


def test_an_interrupt_waits_for_the_end_of_a_block_that_must_not_be_broken(interrupts):
    done = []

    def interrupted():
        with interrupts_wait():
            signal.raise_signal(signal.SIGINT)
            done.append("the rest of the block")

    with pytest.raises(KeyboardInterrupt):
        interrupted()
    assert done == ["the rest of the block"]
    with pytest.raises(KeyboardInterrupt):
        signal.raise_signal(signal.SIGINT)  # and is not lost afterwards


def test_interrupts_that_are_ignored_stay_so(interrupts):
    signal.signal(signal.SIGINT, signal.SIG_IGN)

    with interrupts_wait():
        signal.raise_signal(signal.SIGINT)
    signal.raise_signal(signal.SIGINT)
