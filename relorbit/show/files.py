"""Figures written to files: same input, same bytes."""

from __future__ import annotations

from io import BytesIO
from os import PathLike
from pathlib import Path
from typing import Any

import matplotlib
from matplotlib.figure import Figure

from relorbit.errors import InputError
from relorbit.measures.files import write_text_atomically

DPI = 200
# None takes out what would differ from run to run or from one installation to another
_METADATA: dict[str, dict[str, Any]] = {
    ".png": {"Software": None},
    ".pdf": {"Creator": None, "Producer": None, "CreationDate": None},
    ".svg": {"Creator": None, "Date": None},
}
SUFFIXES = tuple(_METADATA)
_SETTINGS = {"svg.hashsalt": "relorbit", "pdf.fonttype": 42, "path.simplify": True}


def check_format(path: str | PathLike[str]) -> str:
    """The suffix of `path` in small letters; InputError where no figure can be written so."""
    suffix = Path(path).suffix.lower()
    if suffix not in _METADATA:
        found = f"ends in {suffix}" if suffix else "has no suffix"
        raise InputError(
            f"the name {found}; a figure is written as {', '.join(SUFFIXES[:-1])} or "
            f"{SUFFIXES[-1]}",
            path=path,
        )
    return suffix


def save_figure(figure: Figure, path: str | PathLike[str]) -> None:
    """Write a figure as PNG, PDF or SVG, whole or not at all.

    Parameters
    ----------
    figure : Figure
    path : path
        Its suffix names the format.

    Raises
    ------
    InputError
        For another suffix, or when the file cannot be written; nothing is then changed.
    """
    write_text_atomically(path, figure_bytes(figure, check_format(path)))


def figure_bytes(figure: Figure, suffix: str) -> bytes:
    """The content of the file that `save_figure` writes; `suffix` is one of `SUFFIXES`."""
    page = BytesIO()
    with matplotlib.rc_context(_SETTINGS):
        figure.savefig(page, format=suffix[1:], dpi=DPI, metadata=_METADATA[suffix])
    return page.getvalue()
