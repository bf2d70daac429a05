"""The style sheet: print sizes, fonts, and colours that stay apart in grey and for colour-blind readers."""

from __future__ import annotations

import os
import textwrap
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from reweight.errors import OutputError
from reweight.files import replacing

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["BAND", "LINE", "MARK", "SINGLE_COLUMN", "axis_text", "save_figure", "styled"]

SUPERSCRIPTS = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
WIDEST_LABEL = 26  # characters that fit along the height of a panel
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


def axis_text(name: str, unit: str) -> str:
    r"""Label of an axis, in lines short enough for the height of a panel; the unit in brackets.

    Examples
    --------
    >>> axis_text("temperature", "K"), axis_text("free energy over k_B T, counted from 235", "1")
    ('temperature (K)', 'free energy over k_B T,\ncounted from 235')
    """
    # Blanks that do not break keep a unit on one line.
    shown = unit.translate(SUPERSCRIPTS).replace(" ", "\N{NO-BREAK SPACE}")
    text = name if unit in ("", "1") else f"{name} ({shown})"
    return "\n".join(textwrap.wrap(text, WIDEST_LABEL))


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
