"""The files behind the desk: opening, saving, pasting, and keeping unsaved work safe.

It knows no widget. All methods belong to the window's thread.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from os import PathLike
from pathlib import Path

from relorbit.desk.model import DeskModel
from relorbit.desk.rescue import Rescue
from relorbit.desk.settings import Settings
from relorbit.errors import InputError

UNCHANGED, CHANGED, VANISHED = "unchanged", "changed", "vanished"


class ChangedOnDisk(InputError):
    """The file was changed by somebody else since it was read; saving would overwrite that."""


@dataclass(frozen=True)
class Taken:
    """What became of measures that were pasted or read from lists.

    Attributes
    ----------
    read, appended : int
        How many rows there were, and how many of them were new.
    reduced : int
        How many position angles were brought to J2000.
    text : str
        The whole report in words, several lines.
    """

    read: int
    appended: int
    reduced: int
    text: str


class Session:
    """The pair on the desk and its file.

    Attributes
    ----------
    model : DeskModel
    settings : Settings
    """

    def __init__(self, model: DeskModel, settings: Settings) -> None:
        self.model = model
        self.settings = settings

    # each of these puts another pair on the desk and forgets unsaved work: ask first
    def open_file(self, path: str | PathLike[str], allow_any_epoch: bool = False) -> None:
        """Open a pair file or a plain list; raises InputError in the store's words."""
        raise NotImplementedError

    def new_pair(self, name: str = "new pair") -> None:
        """An empty pair without a file."""
        raise NotImplementedError

    def open_example(self, name: str = "tarn_31.ecsv") -> None:
        """A shipped example as an unsaved pair without a file (see EXAMPLES)."""
        raise NotImplementedError

    def reload(self) -> None:
        """Take up the file as it is on disk now: one step that undo takes back."""
        raise NotImplementedError

    def save(self, path: str | PathLike[str] | None = None, force: bool = False) -> Path:
        """Save, under another name when `path` is given; returns the path.

        Raises ChangedOnDisk when the file on disk is no longer the one that was read or saved
        here (then `force`, `reload`, or another name); InputError when there is no name yet, the
        target is not a pair file (a plain list), or cannot be written.
        """
        raise NotImplementedError

    def suggested_path(self) -> Path:
        """A name for 'save as': the file itself, NAME.ecsv for a list or a pair without file."""
        raise NotImplementedError

    @property
    def needs_name(self) -> bool:
        """Whether save() needs a path: never saved, or opened from a plain list."""
        raise NotImplementedError

    def changed_on_disk(self) -> str:
        """"unchanged", "changed" or "vanished"; cheap enough to call every second."""
        raise NotImplementedError

    def paste(self, text: str, columns: Sequence[str] = (), equinox: str | None = None) -> Taken:
        """Take in rows copied from a spreadsheet, a mail or our own table: one undo step.

        `columns`: the table's columns as shown, for tab-separated rows without a header line.
        `equinox`: of rows that do not say ("date", "J2000", a year); None: of date, from space
        J2000. Raises InputError naming the line of the pasted text; nothing is taken then.
        """
        raise NotImplementedError

    def read_lists(
        self,
        paths: Iterable[str | PathLike[str]],
        layout: str | PathLike[str] | None = None,
        equinox: str | None = None,
        technique: str | None = None,
        observer: str | None = None,
    ) -> Taken:
        """Read lists into the pair on the desk, all or none: one undo step."""
        raise NotImplementedError

    def reduce(self) -> int:
        """Bring position angles still of date to J2000 (one undo step); how many."""
        raise NotImplementedError

    def tick(self, now: float) -> str | None:
        """Autosave where it is due; call every 1 to 2 s with time.monotonic().

        Returns a line to show when keeping the work safe has failed or works again, else None.
        """
        raise NotImplementedError

    def found(self) -> list[Rescue]:
        """Unsaved work left behind by a crash for the file on the desk, or for pairs without a
        file when there is none; the latest first. Ask after open_file and at the welcome."""
        raise NotImplementedError

    def restore(self, rescue: Rescue) -> None:
        """Put rescued work on the desk, unsaved (undo shows the file's own)."""
        raise NotImplementedError

    def discard(self, rescue: Rescue) -> None:
        """Delete rescued work."""
        raise NotImplementedError

    def table_text(self, rows: Iterable[int] | None = None, columns: Sequence[str] = ()) -> str:
        """Measures for the clipboard: tab separated with a header line; paste() takes it back."""
        raise NotImplementedError

    def elements_text(self) -> str:
        raise NotImplementedError

    def residuals_text(self) -> str:
        raise NotImplementedError

    def ephemeris_text(self, first: str, last: str, step: str, today: float) -> str:
        """As `relorbit ephemeris` prints it; raises InputError for what was typed."""
        raise NotImplementedError

    def close(self) -> None:
        """End cleanly: no autosave is left, the settings are saved."""
        raise NotImplementedError
