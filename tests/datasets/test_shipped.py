"""The shipped files are the ones of the manifest, and the ones their script makes."""

import hashlib
import json
import tomllib
from dataclasses import replace

import numpy as np
import pytest

from reweight.datasets import SHIPPED, make, shipped
from reweight.datasets.bead_chain import GAS_CONSTANT
from reweight.datasets.exact import canonical, lattice_log_degeneracies

FOLDER = shipped("bead-chain").parent
MANIFEST = json.loads((FOLDER / "manifest.json").read_text(encoding="utf-8"))


@pytest.mark.parametrize("entry", MANIFEST, ids=lambda entry: entry["file"])
def test_each_file_has_the_hash_and_rows_of_the_manifest(entry):
    content = (FOLDER / entry["file"]).read_bytes()

    assert hashlib.sha256(content).hexdigest() == entry["sha256"]
    assert content.count(b"\n") == entry["rows"] + 1  # and a header
    assert (FOLDER / entry["script"]).is_file()


@pytest.mark.parametrize("name", SHIPPED)
def test_manifest_study_and_readme_name_the_same_files(name):
    folder = shipped(name)
    study = tomllib.loads((folder / "study.toml").read_text(encoding="utf-8"))
    readme = (folder / "README.md").read_text(encoding="utf-8")
    described = [file for run in study["run"] for file in run["files"]]

    assert sorted(described) == sorted(path.name for path in folder.glob("*.dat"))
    assert [f"{folder.name}/{file}" for file in described] == [
        entry["file"] for entry in MANIFEST if entry["file"].startswith(folder.name)
    ]
    for entry in MANIFEST:
        if entry["file"].startswith(folder.name):
            assert entry["sha256"] in readme


@pytest.mark.parametrize(
    ("function", "setting", "rows"),
    [(make.make_square_lattice, make.SQUARE_LATTICE, 40), (make.make_bead_chain, make.BEAD_CHAIN, 3)],
)
def test_the_script_makes_the_first_rows_of_the_shipped_files_again(tmp_path, function, setting, rows):
    """Byte for byte; needs a random generator whose streams NumPy has not changed."""
    entries = function(tmp_path, setting=replace(setting, row_count=rows))

    assert len(entries) == len(setting.temperatures)
    for entry in entries:
        made = (tmp_path / entry["file"]).read_bytes()
        assert made.count(b"\n") == rows + 1
        assert (FOLDER / entry["file"]).read_bytes().startswith(made)
    study = f"{setting.folder}/study.toml"
    assert (tmp_path / study).read_bytes() == (FOLDER / study).read_bytes()


def test_the_command_writes_every_study_and_its_manifest(tmp_path, capsys):
    make.main([str(tmp_path), "--rows", "1"])

    entries = json.loads((tmp_path / "manifest.json").read_text(encoding="utf-8"))
    assert [entry["file"] for entry in entries] == [entry["file"] for entry in MANIFEST]
    assert capsys.readouterr().out.splitlines() == [
        f"{entry['sha256']}  {entry['file']}" for entry in entries
    ]


def test_the_shipped_lattice_agrees_with_its_exact_energies():
    """Within 4 standard errors from 50 blocks of 400 rows; the first block holds the start-up and is left out."""
    answer = canonical(*lattice_log_degeneracies(16), make.SQUARE_LATTICE.temperatures)
    for temperature, expected in zip(make.SQUARE_LATTICE.temperatures, answer.mean_energy, strict=True):
        table = np.loadtxt(shipped("square-lattice") / make.SQUARE_LATTICE.file_name.format(temperature))
        blocks = table[:, 1].reshape(50, -1).mean(axis=1)[1:]
        standard_error = blocks.std(ddof=1) / np.sqrt(blocks.size)

        assert abs(blocks.mean() - expected) < 4 * standard_error
        assert standard_error < 0.01 * abs(expected)


def shipped_chain_runs():
    """Potential energies and radii of the shipped chain, each of shape (runs, rows)."""
    names = [make.BEAD_CHAIN.file_name.format(temperature) for temperature in make.BEAD_CHAIN.temperatures]
    tables = np.stack([np.loadtxt(shipped("bead-chain") / name) for name in names])
    return tables[:, :, 1], tables[:, :, 2]


def test_the_shipped_chain_collapses_within_its_temperatures():
    """Fluctuations give each run's heat capacity: that of the middle two exceeds both ends by 3 standard errors."""
    energies, radii = (rows[:, 1000:] for rows in shipped_chain_runs())
    thermal = GAS_CONSTANT * np.array(make.BEAD_CHAIN.temperatures)[:, None]
    squares = ((energies - energies.mean(axis=1, keepdims=True)) / thermal) ** 2
    blocks = squares.reshape(8, 20, -1).mean(axis=2)
    middle = blocks[3:5].mean(axis=0)

    for end in (blocks[0], blocks[7]):
        error = np.sqrt((middle.var(ddof=1) + end.var(ddof=1)) / 20)
        assert middle.mean() - end.mean() > 3 * error
    assert radii[0].mean() < 0.85 * radii[-1].mean()


def test_neighbouring_runs_of_the_shipped_chain_overlap():
    """Common area of neighbouring energy histograms, 1 for equal ones: at least a half."""
    energies = shipped_chain_runs()[0][:, 1000:]
    edges = np.linspace(energies.min(), energies.max(), 60)
    shares = np.array([np.histogram(run, edges)[0] for run in energies]) / energies.shape[1]

    assert np.all(np.minimum(shares[:-1], shares[1:]).sum(axis=1) > 0.5)


def test_cold_runs_of_the_shipped_chain_start_far_from_equilibrium_and_reach_it_early():
    """The stretched start lies above the later mean by 2 standard deviations; 5 % of the rows suffice to get there."""
    energies = shipped_chain_runs()[0][:3]
    later = energies[:, 1000:]

    assert np.all(energies[:, 0] > later.mean(axis=1) + 2 * later.std(axis=1))
    assert np.all(energies[:, :500].min(axis=1) < later.mean(axis=1))


def test_an_unknown_study_is_refused_with_the_known_names():
    with pytest.raises(ValueError, match=r"name must be one of bead-chain, square-lattice; got 'alloy'"):
        shipped("alloy")
