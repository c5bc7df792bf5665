"""What the window can do: one record for the menu entry, the key and the button."""

from __future__ import annotations

import tkinter as tk
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from tkinter import ttk

from relorbit.desk.theme import Palette

MENUS = ("File", "Edit", "Measures", "Orbit", "View", "Help")
TYPING = ("Entry", "TEntry", "TCombobox", "TSpinbox", "Text")
_SAID = {
    "Control": "Ctrl", "minus": "\u2212", "plus": "+", "bracketleft": "[", "bracketright": "]",
    "period": ".", "equal": "=",
}  # fmt: skip


def always() -> bool:
    """For commands that can be given at any time."""
    return True


@dataclass(frozen=True)
class Command:
    """One thing to do.

    Attributes
    ----------
    id : str
        A fixed word.
    label : str
        As the menu and the help window say it.
    menu : str
        One of `MENUS`.
    key : str
        As Tk names it, without brackets: ``Control-s``, ``F5``, ``w``; "" for none. A key without
        Control or a function key counts only while nothing is being typed.
    handler : callable without arguments
    allowed : callable without arguments
        Whether it can be done now.
    button : str
        A shorter label, for a button.
    """

    id: str
    label: str
    menu: str
    key: str
    handler: Callable[[], object]
    allowed: Callable[[], bool] = always
    button: str = ""

    @property
    def key_label(self) -> str:
        """The key as people write it: Ctrl+S."""
        if not self.key:
            return ""
        parts = [_SAID.get(part, part) for part in self.key.split("-")]
        last = parts[-1]
        if len(last) == 1 and last.isupper() and "Ctrl" in parts:
            parts.insert(-1, "Shift")
        return "+".join([*parts[:-1], last.upper() if len(last) == 1 else last])

    @property
    def plain_key(self) -> bool:
        """Whether the key also types a letter or moves in a text."""
        return not (self.key.startswith(("Control", "Command")) or self.key[1:].isdigit())


class CommandSet:
    """The commands of one window, by id."""

    def __init__(self, root: tk.Tk, commands: Iterable[Command]) -> None:
        self._root = root
        self._buttons: list[tuple[ttk.Button, Command]] = []
        self._menus: dict[str, tk.Menu] = {}
        self.all = tuple(commands)
        self.by_id = {command.id: command for command in self.all}
        for command in self.all:
            if command.key:
                root.bind(f"<{command.key}>", self._on_key(command))
            if len(command.key) == 1 and command.key.isalpha():
                root.bind(f"<{command.key.upper()}>", self._on_key(command))

    def do(self, name: str) -> bool:
        """Do it where it is allowed now; says whether it was."""
        command = self.by_id[name]
        if not command.allowed():
            return False
        command.handler()
        return True

    def button(self, parent: tk.Misc, name: str, style: str = "TButton") -> ttk.Button:
        """A button for a command; `refresh` greys it out where it is not allowed."""
        command = self.by_id[name]
        button = ttk.Button(
            parent, text=command.button or command.label, style=style,
            command=lambda: self.do(name), takefocus=True,
        )  # fmt: skip
        self._buttons.append((button, command))
        return button

    def fill(self, bar: tk.Menu, extra: Callable[[str, tk.Menu], None]) -> None:
        """Make the menus; `extra` may add entries of its own to each."""
        for title in MENUS:
            menu = tk.Menu(bar, tearoff=False, postcommand=lambda t=title: self._before_menu(t))
            bar.add_cascade(label=title, menu=menu, underline=0)
            self._menus[title] = menu
            for command in self.all:
                if command.menu == title:
                    self.entry(menu, command.id)
            extra(title, menu)

    def entry(self, menu: tk.Menu, name: str) -> None:
        """Add a command to any menu."""
        command = self.by_id[name]
        menu.add_command(
            label=command.label, accelerator=command.key_label, command=lambda: self.do(name),
            state="normal" if command.allowed() else "disabled",
        )  # fmt: skip

    def refresh(self) -> None:
        """Grey out the buttons of what cannot be done now."""
        for button, command in self._buttons:
            if button.winfo_exists():
                button.state(["!disabled" if command.allowed() else "disabled"])

    def recolour(self, palette: Palette) -> None:
        for menu in self._menus.values():
            dress_menu(menu, palette)

    def _before_menu(self, title: str) -> None:
        menu = self._menus[title]
        by_label = {command.label: command for command in self.all if command.menu == title}
        for index in range((menu.index("end") or 0) + 1):
            if menu.type(index) == "command":
                command = by_label.get(menu.entrycget(index, "label"))
                if command is not None:
                    allowed = command.allowed()
                    menu.entryconfigure(index, state="normal" if allowed else "disabled")

    def _on_key(self, command: Command) -> Callable[[tk.Event], str | None]:
        def pressed(event: tk.Event) -> str | None:
            try:
                kind = event.widget.winfo_class()
            except AttributeError:  # a widget that Tk made for itself, such as an open list
                return None
            if kind in TYPING and (command.plain_key or command.id in ("copy", "paste", "all")):
                return None
            if event.widget.winfo_toplevel() is not self._root:
                return None
            self.do(command.id)
            return "break"

        return pressed


def dress_menu(menu: tk.Menu, palette: Palette) -> None:
    """A menu in the colours of the window."""
    menu.configure(
        background=palette.ground, foreground=palette.ink, activebackground=palette.accent,
        activeforeground=palette.on_accent, disabledforeground=palette.quiet, relief="flat",
        borderwidth=1, activeborderwidth=0, selectcolor=palette.ink,
    )  # fmt: skip
