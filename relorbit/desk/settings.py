"""What the window remembers from one run to the next, in the platform's own folder.

Nothing here is needed to work: a settings file that is damaged, or of another version, is begun
anew, and a single value that cannot be falls back to its default.
"""

from __future__ import annotations

import json
import math
import os
import re
import sys
from contextlib import suppress
from dataclasses import dataclass, field
from os import PathLike
from pathlib import Path
from typing import Any

from relorbit.errors import InputError
from relorbit.measures.files import write_text_atomically

VERSION = 1
MOST_RECENT = 8
FOLDER_VARIABLE = "RELORBIT_CONFIG"
ORIENTATIONS = ("sky", "eyepiece")
SMALLEST_SCALE, LARGEST_SCALE = 0.5, 4.0

_GEOMETRY = re.compile(r"[1-9][0-9]{0,4}x[1-9][0-9]{0,4}([+-]-?[0-9]{1,5}){2}")


def config_folder() -> Path:
    """The folder for settings and for rescued pairs that never had a file; it may not exist yet.

    RELORBIT_CONFIG names another one. Otherwise it is in %APPDATA% on Windows,
    ~/Library/Application Support on macOS, and $XDG_CONFIG_HOME or ~/.config elsewhere.
    """
    said = os.environ.get(FOLDER_VARIABLE)
    if said:
        return Path(said)
    if sys.platform == "win32":
        base = os.environ.get("APPDATA") or Path.home() / "AppData" / "Roaming"
    elif sys.platform == "darwin":
        base = Path.home() / "Library" / "Application Support"
    else:
        base = os.environ.get("XDG_CONFIG_HOME", "")
        if not os.path.isabs(base):  # the XDG standard: a relative path is to be ignored
            base = Path.home() / ".config"
    return Path(base) / "relorbit"


@dataclass
class Settings:
    """What is remembered; the window sets the attributes and calls `save` when it closes.

    Attributes
    ----------
    folder : Path
        Where the file ``desk.json`` is kept.
    recent : tuple of str
        Paths of the files opened last, the latest first, at most `MOST_RECENT`.
    geometry : str
        Size and place of the window as Tk writes it ("1280x800+40+20"); "" for the usual.
    panes : dict of str to float
        Position of each divider, by its name.
    dark : bool
        Dark colours.
    orientation : "sky" or "eyepiece"
    scale : float or None
        Factor of all sizes, 0.5 to 4; None to follow the display.
    """

    folder: Path = field(default_factory=config_folder)
    recent: tuple[str, ...] = ()
    geometry: str = ""
    panes: dict[str, float] = field(default_factory=dict)
    dark: bool = False
    orientation: str = "sky"
    scale: float | None = None

    @property
    def file(self) -> Path:
        return self.folder / "desk.json"

    @classmethod
    def load(cls, folder: str | PathLike[str] | None = None) -> Settings:
        """What was saved; the defaults where there is nothing, or nothing that can be read."""
        settings = cls() if folder is None else cls(Path(folder))
        said = _read(settings.file)
        for name, fits in _FITTING.items():
            if name in said and fits(said[name]):
                setattr(settings, name, said[name])
        settings.recent = tuple(settings.recent[:MOST_RECENT])
        return settings

    def save(self) -> None:
        """Write the file, whole or not at all, in a folder that is made where there is none.

        Raises InputError when it cannot be written.
        """
        said = {name: getattr(self, name) for name in _FITTING}
        try:
            self.folder.mkdir(parents=True, exist_ok=True)
        except OSError as error:
            what = f"cannot make the folder: {error.strerror or error}"
            raise InputError(what, path=self.folder) from None
        text = json.dumps({"version": VERSION, **said}, indent=1, allow_nan=False)
        write_text_atomically(self.file, text + "\n")

    def remember(self, path: str | PathLike[str]) -> None:
        """Put a file first among the recent ones and save.

        Those that another window has put there since are kept. Where the settings cannot be
        written, this run still knows.
        """
        self._set_recent(os.path.abspath(path), first=True)

    def forget(self, path: str | PathLike[str]) -> None:
        """Take a file off the recent ones, such as one that has gone, and save."""
        self._set_recent(os.path.abspath(path), first=False)

    def _set_recent(self, path: str, first: bool) -> None:
        listed = _read(self.file).get("recent")
        others = [*(listed if _are_texts(listed) else ()), *self.recent]
        kept = [other for other in dict.fromkeys(others) if other != path]
        self.recent = tuple([path, *kept] if first else kept)[:MOST_RECENT]
        with suppress(InputError):
            self.save()


def _read(file: Path) -> dict[str, Any]:
    """What the file says, as it stands; nothing where it cannot be read."""
    try:
        said = json.loads(file.read_text(encoding="utf-8"))
    except (OSError, ValueError, RecursionError):
        return {}
    return said if isinstance(said, dict) and said.get("version") == VERSION else {}


def _are_texts(value: Any) -> bool:
    return isinstance(value, list | tuple) and all(isinstance(one, str) for one in value)


def _is_number(value: Any) -> bool:
    is_one = isinstance(value, int | float) and not isinstance(value, bool)
    return is_one and math.isfinite(value)


# what is saved, and whether a value read can be
_FITTING = {
    "recent": _are_texts,
    "geometry": lambda v: isinstance(v, str) and (not v or bool(_GEOMETRY.fullmatch(v))),
    "panes": lambda v: isinstance(v, dict) and all(_is_number(one) for one in v.values()),
    "dark": lambda v: isinstance(v, bool),
    "orientation": lambda v: v in ORIENTATIONS,
    "scale": lambda v: v is None or (_is_number(v) and SMALLEST_SCALE <= v <= LARGEST_SCALE),
}
