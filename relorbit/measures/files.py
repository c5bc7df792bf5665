"""Text files: read whole with plain refusals, written whole or not at all."""

from __future__ import annotations

import codecs
import contextlib
import errno
import os
import re
import secrets
import stat
from os import PathLike
from pathlib import Path

from relorbit.errors import InputError

PREVIOUS = ".previous"

_BYTE_ORDER_MARKS = (
    (codecs.BOM_UTF8, "utf-8"),
    (codecs.BOM_UTF16_LE, "utf-16-le"),
    (codecs.BOM_UTF16_BE, "utf-16-be"),
)
_BINARY = re.compile(rb"[\x00-\x08\x0e-\x1f]")
_FULL = {errno.ENOSPC: "the disk is full", errno.EFBIG: "the file is too large for this disk"}
if hasattr(errno, "EDQUOT"):
    _FULL[errno.EDQUOT] = "the disk quota is used up"


def read_text(path: str | PathLike[str], encoding: str | None = None) -> str:
    """The text of a file, in UTF-8 or with a byte-order mark of UTF-8 or UTF-16.

    Parameters
    ----------
    path : path
        The file.
    encoding : str, optional
        The encoding, when a layout names it.

    Raises
    ------
    InputError
        When there is no such file, it is a directory, cannot be opened, is empty, is binary, or
        has another encoding.
    """
    try:
        data = Path(path).read_bytes()
    except FileNotFoundError:
        raise InputError("no such file; check the name and the folder", path=path) from None
    except IsADirectoryError:
        raise InputError("is a directory; name a file in it", path=path) from None
    except (OSError, ValueError) as error:
        if os.path.isdir(path):  # Windows refuses to open a directory in other words
            raise InputError("is a directory; name a file in it", path=path) from None
        raise InputError(f"cannot be read: {_reason(error)}", path=path) from None
    if not data.strip():
        raise InputError("the file is empty; it needs a header line and measures", path=path)
    return _decode(data, encoding, path)


def _decode(data: bytes, encoding: str | None, path: str | PathLike[str]) -> str:
    for mark, name in _BYTE_ORDER_MARKS:
        if data.startswith(mark):
            data, encoding = data[len(mark) :], name
            break
    else:
        if _BINARY.search(data):
            raise InputError(
                "is a binary file, not a text; save the table as text (CSV) first", path=path
            )
    try:
        return data.decode(encoding or "utf-8")
    except LookupError:
        what = f"{encoding!r} is not an encoding; write utf-8, latin-1 or cp1252"
        raise InputError(what, path=path, column="encoding") from None
    except UnicodeDecodeError as error:
        line = data[: error.start].count(b"\n") + 1
        raise InputError(
            f"byte 0x{data[error.start]:02x} is not {encoding or 'UTF-8'}; save the file as UTF-8",
            path=path,
            line=line,
        ) from None


def write_text_atomically(
    path: str | PathLike[str], content: str | bytes, *, keep_previous: bool = False
) -> None:
    """Write a file whole or not at all: after any failure or interruption the old one stands.

    The content goes to a temporary file beside the target, is flushed to disk, and replaces the
    target in one step. A symbolic link stays, and what it points to is replaced. A device or a
    pipe, which cannot be replaced, is written straight.

    Parameters
    ----------
    path : path
        The file to write.
    content : str or bytes
        Text is written in UTF-8, line ends as they are.
    keep_previous : bool
        Keep the last version beside the target, its name followed by ``.previous``.

    Raises
    ------
    InputError
        When it cannot be written; nothing is then changed.
    """
    data = content.encode("utf-8") if isinstance(content, str) else bytes(content)
    try:
        target = Path(os.path.realpath(path))
        mode = _mode_of_writable(target, path)
        if mode is not None and not stat.S_ISREG(mode):
            with open(target, "wb") as device:
                device.write(data)
            return
        if keep_previous and mode is not None:
            _replace(target.with_name(target.name + PREVIOUS), target.read_bytes(), mode)
        _replace(target, data, mode)
    except (OSError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError(f"not written: {_reason(error)}", path=path) from None


def _mode_of_writable(target: Path, path: str | PathLike[str]) -> int | None:
    """The mode of an existing target, None of one to come; InputError where none can be written."""
    try:
        mode = target.stat().st_mode
    except FileNotFoundError:
        if not target.parent.is_dir():
            what = f"not written: there is no folder {Path(path).parent}; make it first"
            raise InputError(what, path=path) from None
        return None
    if stat.S_ISDIR(mode):
        raise InputError("not written: this is a directory; name a file in it", path=path)
    # The administrator may write anything, but a file without a write bit was closed on purpose.
    if not mode & 0o222 or not os.access(target, os.W_OK):
        raise InputError(
            "not written: the file is read-only; allow writing to it or name another", path=path
        )
    return mode


def _replace(target: Path, data: bytes, mode: int | None) -> None:
    """Put `data` in place of `target` in one step, with the mode given or the usual one."""
    beside = target.with_name(f".{target.name[:40]}.{secrets.token_hex(6)}.tmp")
    flags = os.O_WRONLY | os.O_CREAT | os.O_EXCL | getattr(os, "O_BINARY", 0)
    try:
        with open(os.open(beside, flags, 0o666), "wb") as file:
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        if mode is not None:
            os.chmod(beside, stat.S_IMODE(mode))
        os.replace(beside, target)
    except BaseException:
        with contextlib.suppress(OSError):
            beside.unlink()
        raise
    _flush_folder(target.parent)


def _flush_folder(folder: Path) -> None:
    """Flush the new name to disk where the system can; the file is whole in any case."""
    if not hasattr(os, "O_DIRECTORY"):
        return
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY | os.O_DIRECTORY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)


def _reason(error: Exception) -> str:
    """Why the system refused, in words."""
    if not isinstance(error, OSError):
        return f"{error}; give another name"
    if error.errno in _FULL:
        return f"{_FULL[error.errno]}; make room or choose another place"
    if error.errno in (errno.EACCES, errno.EPERM, errno.EROFS):
        return "no permission here; choose another place, or close the program that holds the file"
    return f"{(error.strerror or str(error)).lower()}; choose another place"
