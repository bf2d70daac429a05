"""Data of our own to learn from and to test with.

- `exact`, `exact_models`: systems whose density of states is known exactly, as independent judges.
- `sampling`: draws from their exact distributions, correlated as wanted.
- `square_lattice`, `bead_chain`: the simulators behind the shipped studies.
- `make`: remakes the shipped studies from their seeds (``python -m reweight.datasets.make FOLDER``).

Nothing here imports the analysis, so that it can judge it.
"""

from pathlib import Path

__all__ = ["SHIPPED", "shipped"]

SHIPPED = ("bead-chain", "square-lattice")


def shipped(name: str) -> Path:
    """Folder of a shipped study: its ``study.toml``, data files and README.

    Parameters
    ----------
    name : str
        One of `SHIPPED`.

    Returns
    -------
    pathlib.Path

    Raises
    ------
    ValueError
        There is no such study.
    """
    if name not in SHIPPED:
        raise ValueError(
            f"name must be one of {', '.join(SHIPPED)}; got {name!r}. Choose one of these studies."
        )
    return Path(__file__).parent / name.replace("-", "_")
