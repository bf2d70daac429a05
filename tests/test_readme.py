"""The README's tour is what the program prints: every console block is run again and compared."""

from __future__ import annotations

import re
import shlex
import shutil
from pathlib import Path

import pytest

from reweight.cli.application import main
from reweight.datasets import shipped

README = Path(__file__).parents[1] / "README.md"
BLOCK = re.compile(r"```console\n(.*?)```", re.DOTALL)


def blocks() -> list[tuple[str, str]]:
    """Commands and what the README says they print, in order."""
    found = []
    for block in BLOCK.findall(README.read_text("utf-8")):
        for part in re.split(r"^\$ ", block, flags=re.MULTILINE)[1:]:
            command, _, printed = part.partition("\n")
            found.append((command, printed))
    return found


def test_every_console_block_prints_what_the_readme_says(tmp_path, monkeypatch, capsys):
    folder = tmp_path / "bead-chain"
    shutil.copytree(shipped("bead-chain"), folder)
    monkeypatch.chdir(folder)
    tour = blocks()
    assert len(tour) >= 4  # otherwise nothing is compared

    for command, printed in tour:
        if command.startswith("cat "):
            assert (folder / command.removeprefix("cat ")).read_text() == printed
            continue
        program, *arguments = shlex.split(command)
        assert program == "reweight"
        with pytest.raises(SystemExit) as ended:
            main(arguments)
        assert ended.value.code == 0, command
        assert capsys.readouterr().out == printed, command


def test_the_set_up_commands_are_the_two_that_the_readme_promises():
    text = README.read_text("utf-8")
    first, second = re.findall(r"```sh\n(.*?)\n```", text, re.DOTALL)[:2]
    assert first.startswith("python3 -m venv .venv && ")
    assert first.endswith("reweight demo")
    assert second.startswith("python3 -m venv .venv && ")
    assert second.endswith("pytest")
