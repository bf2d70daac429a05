"""The style sheet: print sizes, fonts, and colours that stay apart in grey and for colour-blind readers."""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from reweight.errors import OutputError
from reweight.files import replacing

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["BAND", "LINE", "MARK", "save_figure", "styled"]

SINGLE_COLUMN = 3.375  # inches, one column of a two-column journal

LINE = "#1b3a57"
BAND = "#9db8cf"
MARK = "#c4501b"

SETTINGS: dict[Any, Any] = {
    "font.size": 8,
    "axes.labelsize": 8,
    "xtick.labelsize": 7,
    "ytick.labelsize": 7,
    "legend.fontsize": 7,
    "axes.linewidth": 0.6,
    "lines.linewidth": 1.1,
    "xtick.direction": "in",
    "ytick.direction": "in",
    "figure.constrained_layout.use": True,
    "savefig.dpi": 300,
    "pdf.fonttype": 42,
    "svg.hashsalt": "reweight",
    "svg.fonttype": "none",
}

FORMATS = (".pdf", ".png", ".svg")


@contextmanager
def styled() -> Iterator[None]:
    """Apply the style sheet to everything drawn inside."""
    import matplotlib as mpl

    with mpl.rc_context(SETTINGS):
        yield


def save_figure(
    figure: Figure,
    path: str | os.PathLike[str],
    *,
    force: bool = False,
    inputs: Iterable[str | os.PathLike[str]] = (),
) -> None:
    """Write a figure, byte for byte the same for the same content.

    Raises
    ------
    OutputError
        The ending is none of .pdf, .png, .svg, or the file cannot be written.
    """
    ending = os.path.splitext(os.fspath(path))[1].lower()
    if ending not in FORMATS:
        raise OutputError(f"a picture must end in one of {', '.join(FORMATS)}; got {os.fspath(path)!r}.")
    metadata = {".pdf": {"CreationDate": None}, ".svg": {"Date": None}, ".png": {"Software": None}}[ending]
    with styled(), replacing(path, force=force, inputs=inputs) as beside:
        figure.savefig(beside, format=ending[1:], metadata=metadata)
