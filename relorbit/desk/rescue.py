"""Unsaved work kept beside the pair file, so that a crash costs seconds and not an evening."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path


@dataclass(frozen=True)
class Rescue:
    """Unsaved work that a window left behind when it ended without warning.

    Attributes
    ----------
    file : Path
        Where it is kept: a pair file.
    path : Path or None
        The file it belongs to; None for a pair that was never saved.
    written : float
        When it was written, seconds since 1970 as `time.time`.
    file_is_newer : bool
        The file has been changed since: restoring and saving would undo that.
    """

    file: Path
    path: Path | None
    written: float
    file_is_newer: bool
