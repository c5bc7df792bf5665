"""Windows for tests: opened with an invented pair, driven, and let settle."""

from __future__ import annotations

import contextlib
import tempfile
import time
import tkinter as tk
from collections.abc import Callable, Iterator
from tkinter import ttk

import numpy as np

from relorbit.desk.dialogs import Dialog, Form
from relorbit.desk.settings import Settings
from relorbit.desk.window import Desk
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, positions

INVENTED = Elements(47.3, 1987.4, 0.37, 1.24, 57.0, 62.0, 143.0)


def invented_pair(count: int, seed: int = 7) -> Pair:
    """Measures of an invented orbit with errors by a fixed seed."""
    rng = np.random.default_rng(seed)
    epoch = np.sort(rng.uniform(1930.0, 2025.0, count))
    theta, rho = positions(INVENTED, epoch)
    error = np.where(epoch < 1975.0, 0.05, 0.01)
    theta_err = np.degrees(error / rho)
    return Pair.from_arrays(
        epoch, np.mod(theta + theta_err * rng.standard_normal(count), 360.0),
        np.abs(rho + error * rng.standard_normal(count)), theta_err, error, name="Invented 9",
        technique=np.where(epoch < 1975.0, "eyepiece", "camera"), parallax_mas=40.0,
        observer=np.where(rng.random(count) < 0.5, "A. Nobody", "B. Noone"),
    )  # fmt: skip


@contextlib.contextmanager
def quiet_settings() -> Iterator[Settings]:
    """Settings in a folder that goes afterwards."""
    with tempfile.TemporaryDirectory() as folder:
        yield Settings.load(folder)


def opened(desk: Desk, pair: Pair, elements: Elements | None = INVENTED) -> Desk:
    """A window with a pair and an orbit to look at."""
    desk.model.open(pair, None)
    desk.show_desk()
    if elements is not None:
        desk.model.set_elements(elements)
    return desk


def settle(
    desk: Desk,
    seconds: float = 0.2,
    until: Callable[[], bool] | None = None,
    strict: bool = True,
) -> None:
    """Let the window do what it has to; until something is so, where that is asked."""
    end = time.monotonic() + seconds
    while time.monotonic() < end:
        desk.root.update()
        if until is not None and until():
            return
        time.sleep(0.004)
    if until is not None and strict:
        raise AssertionError(f"not within {seconds} s")


def dialogs(desk: Desk) -> list[tk.Toplevel]:
    """Windows that are open over the desk."""
    return [child for child in desk.root.winfo_children() if isinstance(child, tk.Toplevel)]


def press(desk: Desk, key: str) -> None:
    """Press a key in the table, and let the window follow."""
    desk.table.tree.focus_force()
    desk.root.update()
    desk.table.tree.event_generate(f"<{key}>")
    settle(desk, 0.05)


def typed(desk: Desk, field: ttk.Entry, text: str) -> None:
    """Type into a field and press Return."""
    field.focus_force()
    field.delete(0, "end")
    field.insert(0, text)
    field.event_generate("<Return>")
    settle(desk, 0.05)


def answer(
    desk: Desk,
    button: str,
    then: Callable[[Form], object] | None = None,
    **fields: str,
) -> list[str]:
    """Answer the next dialog: fill in fields, press a button.

    A form that stays open is handed to `then` and left by Escape. Returns a list that the words
    of the dialog will be put into.
    """
    said: list[str] = []

    def look() -> None:
        waiting = [one for one in dialogs(desk) if isinstance(one, Dialog)]
        if not waiting or not waiting[-1].winfo_viewable():
            desk.root.after(20, look)
            return
        dialog = waiting[-1]
        said.extend(_words(dialog)[:1])
        for name, text in fields.items():
            dialog.widgets[name].delete(0, "end")
            dialog.widgets[name].insert(0, text)
        buttons = {one["text"]: one for one in dialog.default.master.winfo_children()}
        buttons[button].invoke()
        if dialog.winfo_exists():
            if then is not None:
                then(dialog)
            dialog.leave()

    desk.root.after(20, look)
    return said


def _words(dialog: Dialog) -> list[str]:
    return [one["text"] for one in dialog.inner.winfo_children() if isinstance(one, ttk.Label)]
