"""Open the window: a pair on the desk, its measures, the sky plane, the residuals and the elements,
to work on by eye and hand. Without a pair file it opens with a choice of what to begin with.
"""

from __future__ import annotations

import argparse
from importlib import import_module
from pathlib import Path
from threading import Thread

from relorbit.errors import InputError

EXAMPLE = """  relorbit desk
  relorbit desk pair.ecsv
"""
NO_TKINTER = (
    "the window needs tkinter, which this Python lacks; install python3-tk (Debian, Ubuntu), "
    "python3-tkinter (Fedora), tk (Arch) or python-tk (Homebrew); all the other verbs work without"
)
NO_DISPLAY = (
    "no display to open a window on; work from the command line instead, see relorbit --help: "
    "solve, ephemeris, residuals and draw need no display"
)


def configure(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "pair",
        metavar="PAIR",
        nargs="?",
        type=Path,
        help="a pair file (ECSV), or a plain list with a header line",
    )


def run(options: argparse.Namespace) -> int:
    """Open the window and stay until it is closed; what hinders it is said before one opens."""
    if options.pair is not None:
        from relorbit.measures.store import read_pair

        read_pair(options.pair)
    require_display()
    # saving needs a library that is slow to load: begin now, and not in the midst of work
    Thread(target=import_module, args=("astropy.table",), daemon=True).start()
    from relorbit.desk.window import run as open_window

    return open_window(options.pair)


def require_display() -> None:
    """Raise InputError where no window can be opened."""
    try:
        import tkinter
    except ImportError:
        raise InputError(NO_TKINTER) from None
    try:
        root = tkinter.Tk()  # nothing is seen: it is gone before Tk draws it
    except tkinter.TclError:
        raise InputError(NO_DISPLAY) from None
    root.destroy()
