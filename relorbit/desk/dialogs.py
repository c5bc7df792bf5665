"""Questions and notices of the window, in its own colours, and forms that check what is typed."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable, Mapping, Sequence
from contextlib import suppress
from dataclasses import dataclass
from tkinter import ttk

from relorbit.desk.theme import Palette, Sizes
from relorbit.desk.words import words_of
from relorbit.errors import RelorbitError


@dataclass(frozen=True)
class Field:
    """A line of a form: a name, what stands before it, the text in it, and choices if any."""

    name: str
    label: str
    value: str = ""
    choices: Sequence[str] = ()
    hint: str = ""


class Dialog(tk.Toplevel):
    """A window over the desk that waits for an answer; Escape is the last button."""

    def __init__(self, parent: tk.Misc, palette: Palette, title: str) -> None:
        super().__init__(parent, background=palette.ground, highlightthickness=1,
                         highlightbackground=palette.line, highlightcolor=palette.line)  # fmt: skip
        self.withdraw()
        self.title(title)
        self.transient(parent.winfo_toplevel())
        self.resizable(False, False)
        self.sizes = Sizes(self)
        self.answer: str | None = None
        self.inner = ttk.Frame(self, padding=self.sizes(14))
        self.inner.pack(fill="both", expand=True)
        self.protocol("WM_DELETE_WINDOW", self.leave)
        self.bind("<Escape>", lambda _: self.leave())

    def buttons(self, names: Sequence[str], on_press: Callable[[str], None]) -> None:
        """The row of buttons; the first is what Return presses."""
        row = ttk.Frame(self.inner)
        row.pack(fill="x", pady=(self.sizes(12), 0))
        for name in reversed(names):
            first = name == names[0]
            button = ttk.Button(row, text=name, style="Next.TButton" if first else "TButton",
                                command=lambda n=name: on_press(n))  # fmt: skip
            button.pack(side="right", padx=(self.sizes(6), 0))
            button.bind("<Return>", lambda _, n=name: [on_press(n), "break"][1])
            if first:
                self.default = button
        self.bind("<Return>", lambda _: on_press(names[0]))

    def press(self, name: str) -> None:
        """Answer with a button and close."""
        self.answer = name
        self.leave()

    def leave(self) -> None:
        self.grab_release()
        self.destroy()

    def wait(self, focus: tk.Misc | None = None) -> str | None:
        """Show it in the middle of the window and wait; the button pressed, None when closed."""
        owner = self.master.winfo_toplevel()
        self.update_idletasks()
        width, height = self.winfo_reqwidth(), self.winfo_reqheight()
        x = owner.winfo_rootx() + (owner.winfo_width() - width) // 2
        y = owner.winfo_rooty() + (owner.winfo_height() - height) // 3
        x = max(0, min(x, self.winfo_screenwidth() - width))
        y = max(0, min(y, self.winfo_screenheight() - height))
        self.geometry(f"+{x}+{y}")
        self.deiconify()
        self.wait_visibility()
        self.grab_set()
        (focus or self.default).focus_set()
        self.wait_window()
        with suppress(tk.TclError):  # the whole window may have been closed meanwhile
            owner.focus_set()
        return self.answer


def tell(
    parent: tk.Misc, palette: Palette, title: str, words: str, buttons: Sequence[str] = ("OK",)
) -> str | None:
    """Say something and wait for one of the buttons; None when it was closed."""
    dialog = Dialog(parent, palette, title)
    ttk.Label(dialog.inner, text=words, justify="left", wraplength=dialog.sizes(440)).pack(
        anchor="w"
    )
    dialog.buttons(buttons, dialog.press)
    return dialog.wait()


class Form(Dialog):
    """Fields to fill in. What `take` refuses is said in the form, which then stays open."""

    def __init__(
        self,
        parent: tk.Misc,
        palette: Palette,
        title: str,
        fields: Sequence[Field],
        take: Callable[[Mapping[str, str]], object],
        ok: str,
        intro: str = "",
    ) -> None:
        super().__init__(parent, palette, title)
        self._take, self._ok = take, ok
        if intro:
            label = ttk.Label(self.inner, text=intro, wraplength=self.sizes(440), justify="left")
            label.pack(anchor="w", pady=(0, self.sizes(8)))
        grid = ttk.Frame(self.inner)
        grid.pack(fill="x")
        self.widgets: dict[str, ttk.Entry] = {}
        for at, field in enumerate(fields):
            self._put(grid, at, field)
        grid.columnconfigure(1, weight=1)
        self.wrong = ttk.Label(self.inner, style="Warn.TLabel", wraplength=self.sizes(440),
                               justify="left")  # fmt: skip
        self.buttons((ok, "Cancel"), self._pressed)

    def _put(self, grid: tk.Misc, at: int, field: Field) -> None:
        gap = self.sizes(2)
        ttk.Label(grid, text=field.label).grid(row=at, column=0, sticky="w", padx=(0, 8), pady=gap)
        if field.choices:
            widget = ttk.Combobox(grid, values=tuple(field.choices), width=30)
            widget.set(field.value)
        else:
            widget = ttk.Entry(grid, width=32)
            widget.insert(0, field.value)
        widget.grid(row=at, column=1, sticky="ew", pady=gap)
        if field.hint:
            hint = ttk.Label(grid, text=field.hint, style="Small.TLabel")
            hint.grid(row=at, column=2, sticky="w", padx=(8, 0))
        self.widgets[field.name] = widget

    def _pressed(self, name: str) -> None:
        if name != self._ok:
            self.leave()
            return
        try:
            self._take({name: widget.get() for name, widget in self.widgets.items()})
        except RelorbitError as error:
            self.wrong.configure(text=words_of(error))
            self.wrong.pack(anchor="w", pady=(self.sizes(8), 0), before=self.default.master)
            return
        self.press(name)


def fill_in(
    parent: tk.Misc,
    palette: Palette,
    title: str,
    fields: Sequence[Field],
    take: Callable[[Mapping[str, str]], object],
    ok: str,
    intro: str = "",
) -> bool:
    """Show a form until it is taken or given up; True when it was taken."""
    form = Form(parent, palette, title, fields, take, ok, intro)
    return form.wait(next(iter(form.widgets.values()))) == ok
