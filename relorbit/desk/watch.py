"""Whether a file on disk is still the one that was read or written here."""

from __future__ import annotations

import hashlib
import os
import time
from os import PathLike
from pathlib import Path

UNCHANGED, CHANGED, VANISHED = "unchanged", "changed", "vanished"
# a file system tells two changes apart only so many seconds after each other (FAT: 2)
COARSEST_CLOCK_S = 3.0


class FileWatch:
    """Remembers the content of one file, and looks whether it is still there."""

    def __init__(self) -> None:
        self.path: Path | None = None
        self._digest = b""
        self._seen: tuple[int, int, int] | None = None
        self._state = UNCHANGED

    def forget(self) -> None:
        """No file is watched."""
        self.__init__()

    def read(self, path: str | PathLike[str]) -> None:
        """The file is about to be read: its content is what counts from now on.

        Call it before reading, so that a change in between is noticed and not missed.
        """
        self.forget()
        self.path = Path(path)
        try:
            self._digest = hashlib.sha256(self.path.read_bytes()).digest()
        except OSError:
            self._digest = b""  # the one who reads will say what is wrong

    def wrote(self, path: str | PathLike[str], content: bytes) -> None:
        """The file has been written with this content."""
        self.forget()
        self.path, self._digest = Path(path), hashlib.sha256(content).digest()

    def is_of(self, path: str | PathLike[str]) -> bool:
        """True when `path` is the file watched, perhaps by another name."""
        return self.path is not None and os.path.realpath(self.path) == os.path.realpath(path)

    def state(self) -> str:
        """`UNCHANGED`, `CHANGED` or `VANISHED`; reads the file only when its date has changed."""
        if self.path is None:
            return UNCHANGED
        try:
            about = os.stat(self.path)
            now = (about.st_mtime_ns, about.st_size, about.st_ino)
            if now == self._seen:
                return self._state
            digest = hashlib.sha256(self.path.read_bytes()).digest()
        except OSError:
            self._seen = None
            return VANISHED
        settled = abs(time.time() - about.st_mtime) > COARSEST_CLOCK_S
        self._seen = now if settled else None
        self._state = UNCHANGED if digest == self._digest else CHANGED
        return self._state
