"""Unsaved work kept beside the pair file, so that a crash costs seconds and not an evening.

A window that has unsaved changes keeps them in a pair file of its own, hidden beside the one it
works on, or in the settings' folder where there is none or its folder cannot be written. While it
runs it holds a lock that the system takes away when the process ends, however it ends: what is
kept and no longer locked was left behind.
"""

from __future__ import annotations

import hashlib
import os
import re
import secrets
from contextlib import suppress
from dataclasses import dataclass
from os import PathLike
from pathlib import Path

from relorbit.errors import InputError
from relorbit.measures.files import write_text_atomically
from relorbit.measures.pair import Pair
from relorbit.measures.store import pair_text, read_pair

KEPT, RUNNING = "unsaved", "running"
_NAME = re.compile(r"\.rescue-(?P<window>[0-9]+-[0-9a-f]{8})\.(?P<of>.+)", re.DOTALL)


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


class Autosave:
    """Where one window keeps its unsaved work.

    Parameters
    ----------
    folder : Path
        The settings' folder; made when something is kept.

    Attributes
    ----------
    file : Path or None
        What is kept at present.
    """

    def __init__(self, folder: Path) -> None:
        self._folder = folder
        self._window = f"{os.getpid()}-{secrets.token_hex(4)}"
        self._lock: int | None = None
        self.file: Path | None = None

    def write(self, pair: Pair, path: str | PathLike[str] | None) -> None:
        """Keep the pair, in place of what was kept before.

        Parameters
        ----------
        pair : Pair
        path : path or None
            The file it belongs to.

        Raises
        ------
        InputError
            When it can be kept nowhere; what was kept before then stands.
        """
        self._take_lock()
        text, refusal = pair_text(pair), None
        for folder, of in _places(path, self._folder):
            file = folder / f".rescue-{self._window}.{of}"
            try:
                if folder.parent == self._folder:
                    _make(folder)
                write_text_atomically(file, text)
            except InputError as error:
                refusal = refusal or error
                continue
            if self.file != file:
                self.remove()
                self.file = file
            return
        raise refusal

    def adopt(self, rescue: Rescue) -> None:
        """Make what another window left behind one's own.

        Raises InputError when it has gone or cannot be moved.
        """
        self._take_lock()
        window, of = _NAME.fullmatch(rescue.file.name).groups()
        file = rescue.file.with_name(f".rescue-{self._window}.{of}")
        try:
            os.replace(rescue.file, file)
        except OSError as error:
            what = f"cannot be taken over: {error.strerror or error}"
            raise InputError(what, path=rescue.file) from None
        self.remove()
        self.file = file
        _sweep(rescue.file.parent, window, self._folder)

    def remove(self) -> None:
        """Keep nothing: the work is saved, or given up."""
        if self.file is not None:
            # what cannot be deleted now equals the file, and goes when that is opened again
            with suppress(OSError):
                self.file.unlink()
            self.file = None

    def close(self) -> None:
        """End cleanly: nothing is kept, and no lock held."""
        self.remove()
        if self._lock is not None:
            os.close(self._lock)
            self._lock = None
            _sweep(None, self._window, self._folder)

    def _take_lock(self) -> None:
        if self._lock is None:
            # without a place for locks the work is still kept; another window may then offer it
            with suppress(OSError, InputError):
                _make(self._folder / RUNNING)
                file = _lock_file(self._folder, self._window)
                self._lock = os.open(file, os.O_RDWR | os.O_CREAT, 0o600)
                _lock(self._lock)


def found(path: str | PathLike[str] | None, folder: Path) -> list[Rescue]:
    """Work left behind for a file, or for pairs that never had one; the latest first.

    What holds nothing beyond the file is deleted on the way.

    Parameters
    ----------
    path : path or None
        The pair file or list; None for pairs that were never saved.
    folder : Path
        The settings' folder.
    """
    left = []
    for where, of in _places(path, folder):
        for entry in _listed(where):
            match = _NAME.fullmatch(entry.name)
            if match is None or match["of"] != of or _is_running(match["window"], folder):
                continue
            rescue = _rescue(entry, path)
            if rescue is not None and not _is_in_the_file(rescue):
                left.append(rescue)
            elif rescue is not None:
                discard(rescue, folder)
    return sorted(left, key=lambda one: one.written, reverse=True)


def discard(rescue: Rescue, folder: Path) -> None:
    """Delete what was left behind.

    Raises InputError when it cannot be deleted.
    """
    try:
        rescue.file.unlink(missing_ok=True)
    except OSError as error:
        what = f"cannot be deleted: {error.strerror or error}"
        raise InputError(what, path=rescue.file) from None
    _sweep(rescue.file.parent, _NAME.fullmatch(rescue.file.name)["window"], folder)


def _places(path: str | PathLike[str] | None, folder: Path) -> list[tuple[Path, str]]:
    """Folders to keep work in, the best first, and what it is called there."""
    if path is None:
        return [(folder / KEPT, "new.ecsv")]
    real = os.path.realpath(path)
    key = hashlib.sha256(os.fsencode(real)).hexdigest()[:16]
    return [(Path(real).parent, Path(real).name), (folder / KEPT, f"{key}.ecsv")]


def _rescue(file: Path, path: str | PathLike[str] | None) -> Rescue | None:
    """What is known of a file with kept work; None when it has just gone."""
    try:
        written = file.stat().st_mtime
    except OSError:
        return None
    newer = False
    if path is not None:
        with suppress(OSError):
            newer = os.stat(path).st_mtime > written
    return Rescue(file, None if path is None else Path(path), written, newer)


def _is_in_the_file(rescue: Rescue) -> bool:
    if rescue.path is None:
        return False
    try:
        kept = read_pair(rescue.file, allow_any_epoch=True)
        return kept == read_pair(rescue.path, allow_any_epoch=True)
    except InputError:
        return False


def _listed(folder: Path) -> list[Path]:
    try:
        return list(folder.iterdir())
    except OSError:
        return []


def _sweep(folder: Path | None, window: str, settings_folder: Path) -> None:
    """Remove the lock file of a window that has ended, and what it had half written."""
    half = [] if folder is None else _listed(folder)
    half = [f for f in half if f.name.startswith(f"..rescue-{window}.") and f.suffix == ".tmp"]
    for file in (*half, _lock_file(settings_folder, window)):
        with suppress(OSError):
            file.unlink()


def _make(folder: Path) -> None:
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise InputError(f"cannot make the folder: {error.strerror}", path=folder) from None


def _lock_file(folder: Path, window: str) -> Path:
    return folder / RUNNING / f"{window}.lock"


def _is_running(window: str, folder: Path) -> bool:
    """True while the window's process lives: its lock cannot be had."""
    try:
        handle = os.open(_lock_file(folder, window), os.O_RDWR)
    except OSError:
        return False
    try:
        _lock(handle)
    except OSError:
        return True
    finally:
        os.close(handle)
    return False


def _lock(handle: int) -> None:
    """Lock a file for this process alone; raises OSError where another one has it."""
    if os.name == "nt":
        import msvcrt

        msvcrt.locking(handle, msvcrt.LK_NBLCK, 1)
    else:
        import fcntl

        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
