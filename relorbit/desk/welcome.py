"""What the window shows before there is a pair: ways to begin."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable, Sequence
from pathlib import Path
from tkinter import ttk

from relorbit.desk.commands import CommandSet
from relorbit.desk.session import EXAMPLES
from relorbit.desk.theme import Sizes

INTRO = "Find the orbit of a double star, see what every measure says of it, and what follows."


class Welcome(ttk.Frame):
    """Open, new, read, or an example; and the files opened last."""

    def __init__(
        self,
        parent: tk.Misc,
        commands: CommandSet,
        on_example: Callable[[str], None],
        on_recent: Callable[[str], None],
    ) -> None:
        super().__init__(parent)
        sizes = Sizes(self)
        self._on_recent = on_recent
        inner = ttk.Frame(self)
        inner.place(relx=0.5, rely=0.46, anchor="center")
        ttk.Label(inner, text="relorbit", style="Name.TLabel").grid(
            row=0, column=0, columnspan=2, sticky="w"
        )
        ttk.Label(inner, text=INTRO, style="Quiet.TLabel").grid(
            row=1, column=0, columnspan=2, sticky="w", pady=(sizes(2), sizes(18))
        )
        left = ttk.Frame(inner)
        left.grid(row=2, column=0, sticky="nw", padx=(0, sizes(36)))
        for name in ("open", "new", "read"):
            button = commands.button(left, name)
            button.pack(fill="x", pady=(0, sizes(6)), ipady=sizes(2), ipadx=sizes(6))
        right = ttk.Frame(inner)
        right.grid(row=2, column=1, sticky="n")
        ttk.Label(right, text="Try an example (invented pairs)", style="Bold.TLabel").pack(
            anchor="w", pady=(0, sizes(4))
        )
        self.examples = []
        for at, (name, words) in enumerate(EXAMPLES):
            style = "First.TButton" if at == 0 else "Choice.TButton"
            button = ttk.Button(right, text=words, style=style,
                                command=lambda n=name: on_example(n))  # fmt: skip
            button.pack(fill="x", pady=(0, sizes(4)))
            self.examples.append(button)
        self._recent = ttk.Frame(inner)
        self._recent.grid(row=3, column=0, columnspan=2, sticky="w", pady=(sizes(16), 0))

    def offer(self, recent: Sequence[str]) -> None:
        """List the files opened last, those that are still there."""
        for child in self._recent.winfo_children():
            child.destroy()
        there = [path for path in recent if Path(path).is_file()]
        if there:
            ttk.Label(self._recent, text="Opened last", style="Bold.TLabel").pack(anchor="w")
        for path in there[:5]:
            ttk.Button(self._recent, text=path, command=lambda p=path: self._on_recent(p)).pack(
                fill="x", pady=2
            )
