"""``reweight demo``: the whole job on shipped data."""

from __future__ import annotations

import shutil
import sys
from pathlib import Path

import click

from reweight.cli import options
from reweight.cli.combine import run_combine

__all__ = ["demo"]


@click.command(short_help="Copy example runs into a folder and do the whole job on them.")
@click.argument("folder", type=options.plain_path, default="reweight-demo")
def demo(folder: Path) -> None:
    """Copy the shipped studies into FOLDER, combine one of them, draw its curves, and say what to try next.

    FOLDER must not exist yet.  The runs were made by simulators of our own: a chain of beads that collapses on
    cooling, and a square lattice of two-state sites whose answers are known exactly.
    """
    from reweight.datasets import SHIPPED, shipped
    from reweight.files import new_folder

    with new_folder(folder) as beside:
        for name in SHIPPED:
            (beside / name).mkdir()
            for file in shipped(name).iterdir():
                shutil.copyfile(file, beside / name / file.name)
    try:
        _whole_job(folder)
    except BaseException:
        shutil.rmtree(folder, ignore_errors=True)  # it was made just now, and another attempt needs the name
        raise


def _whole_job(folder: Path) -> None:
    from reweight.answers.curve import curve
    from reweight.answers.peak import peaks
    from reweight.datasets import SHIPPED
    from reweight.figures.curves import curve_figure
    from reweight.figures.style import save_figure
    from reweight.saving import open_combined

    chain = folder / "bead-chain"
    click.echo(f"copied {', '.join(SHIPPED)} to {folder}; combining {chain / 'study.toml'}:\n")
    run_combine(chain / "study.toml", None, workers=2, as_json=False, force=False, quiet=False)
    combined = open_combined(chain / "study.nc")
    picture = chain / "curves.png"
    save_figure(curve_figure(combined, curve(combined), peaks(combined)[:1]), picture)
    temperature = combined.temperatures.mean()
    program = "reweight" if shutil.which("reweight") else sys.argv[0]  # the environment need not be activated
    click.echo(
        f"\ndrew {picture}\n\ntry next:\n"
        f"  {program} curve {chain / 'study.nc'} --at {temperature:.0f} --per-count\n"
        f"  {program} peak {chain / 'study.nc'} --json\n"
        f"  {program} combine {folder / 'square-lattice' / 'study.toml'}   (its exact peak: T = 2.3175, C/N = 1.5522)"
    )
