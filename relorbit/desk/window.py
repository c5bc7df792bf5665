"""The window: its parts, their places, and what keeps it running."""

from __future__ import annotations

import time
import tkinter as tk
from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import contextmanager, suppress
from pathlib import Path
from types import TracebackType
from typing import Any

from relorbit.cli.common import today
from relorbit.cli.main import report_fault
from relorbit.desk import dialogs
from relorbit.desk.commands import Command, CommandSet, dress_menu
from relorbit.desk.elements_view import ElementsView
from relorbit.desk.file_actions import FileActions
from relorbit.desk.follows_view import FollowsView
from relorbit.desk.help import show_help
from relorbit.desk.measure_actions import MeasureActions
from relorbit.desk.model import FILE, ORBIT, PAIR, SELECTION, VIEW, DeskModel
from relorbit.desk.orbit_actions import OrbitActions
from relorbit.desk.parts import Bench, Panes, Status, on_screen
from relorbit.desk.sample_actions import SampleActions
from relorbit.desk.session import EXAMPLES, Session
from relorbit.desk.settings import Settings
from relorbit.desk.sky_view import SkyView
from relorbit.desk.slip_actions import SlipActions
from relorbit.desk.strips_view import StripsView
from relorbit.desk.table_view import TableView
from relorbit.desk.theme import PALETTES, Sizes, dress, set_fonts, set_scaling
from relorbit.desk.view_actions import ViewActions
from relorbit.desk.welcome import Welcome
from relorbit.desk.words import words_of
from relorbit.desk.worker import Outcome, Worker
from relorbit.errors import InputError, RelorbitError
from relorbit.orbit.elements import Elements

POLL, TICK, WATCH = 40, 2000, 1000  # milliseconds
PATIENCE = 5.0  # seconds that the end of a job is waited for when the window closes


class Desk:
    """One window on one pair.

    Attributes
    ----------
    root : tk.Tk
    model, session, settings, worker : what the window shows and sends its intentions to
    year : float
        Today, Julian year.
    """

    def __init__(self, settings: Settings | None = None) -> None:
        self.settings = settings or Settings.load()
        self.root = tk.Tk(className="relorbit")
        self.root.withdraw()
        self.root.report_callback_exception = self._fault
        self._faulty = False
        self._closing = False
        self._waiting: dict[str, str] = {}
        self._welcoming = True
        set_scaling(self.root, self.settings.scale or 1.0)
        self.sizes = Sizes(self.root)
        self.palette = PALETTES["dark" if self.settings.dark else "light"]
        set_fonts(self.root)
        dress(self.root, self.palette)
        self.year = today()
        self.model = DeskModel()
        self.model.look(orientation=self.settings.orientation, epoch=self.year)
        self.session = Session(self.model, self.settings)
        self.worker = Worker()
        self.show_others = True
        self._act()
        self._lay_out()
        self.model.subscribe(self._changed)
        self._changed(frozenset((PAIR, ORBIT, SELECTION, VIEW, FILE)))
        self._wear()
        self._open_window()

    def _act(self) -> None:
        self.files = FileActions(self)
        self.measures = MeasureActions(self)
        self.orbits = OrbitActions(self)
        self.sampling = SampleActions(self)
        self.slips = SlipActions(self)
        model = self.model
        self.commands = CommandSet(self.root, (
            *self.files.commands(),
            Command("quit", "Close", "File", "Control-q", self.close),
            Command("undo", "Undo", "Edit", "Control-z", self.undo,
                    lambda: model.undo_label is not None, "Undo"),
            Command("redo", "Redo", "Edit", "Control-y", self.redo,
                    lambda: model.redo_label is not None, "Redo"),
            *self.measures.commands(),
            *self.slips.commands(),
            *self.orbits.commands(),
            *self.sampling.commands(),
            *ViewActions(self).commands(),
            Command("help", "Keys and how to begin", "Help", "F1", self.help),
        ))  # fmt: skip

    # -- parts ---------------------------------------------------------------------------------

    def _lay_out(self) -> None:
        bar = tk.Menu(self.root)
        self.bar = bar
        self.root.configure(menu=bar)
        self.context = tk.Menu(self.root, tearoff=False)
        self.bench = Bench(self.root, self.commands)
        self.status = Status(self.root)
        self.welcome = Welcome(self.root, self.commands, self.files.open_example,
                               self.files.open_path)  # fmt: skip
        self.panes = Panes(self.root, self.settings)
        panes, model, palette = self.panes, self.model, self.palette
        self.sky = SkyView(panes.upper, model, palette, self.menu_at, self.others)
        self.strips = StripsView(panes.upper, model, palette, self.menu_at)
        self.elements = ElementsView(panes.upper, model, self.commands)
        self.table = TableView(panes.lower, model, palette, self.menu_at)
        self.follows = FollowsView(panes.lower, model, self.commands, self.ephemeris_text,
                                   self.year)  # fmt: skip
        panes.hold((self.sky, self.strips, self.elements), (self.table, self.follows))
        self.views = (self.sky, self.strips, self.elements, self.table, self.follows)
        self.commands.fill(bar, self._more_entries)
        self.status.pack(side="bottom", fill="x")
        self.welcome.pack(fill="both", expand=True)

    def _more_entries(self, title: str, menu: tk.Menu) -> None:
        """Examples and the files opened last, in the File menu."""
        if title != "File":
            return
        examples = tk.Menu(menu, tearoff=False)
        for name, words in EXAMPLES:
            examples.add_command(label=words, command=lambda n=name: self.files.open_example(n))
        self.recent = tk.Menu(menu, tearoff=False, postcommand=self._list_recent)
        menu.insert_cascade(2, label="Opened last", menu=self.recent)
        menu.insert_cascade(3, label="Try an example", menu=examples)
        self._submenus = (examples, self.recent)

    def _list_recent(self) -> None:
        self.recent.delete(0, "end")
        for path in self.settings.recent:
            self.recent.add_command(label=path, command=lambda p=path: self.files.open_path(p))
        if not self.settings.recent:
            self.recent.add_command(label="none yet", state="disabled")

    def _open_window(self) -> None:
        sizes, root = self.sizes, self.root
        wide = min(sizes(1280), root.winfo_screenwidth())
        high = min(sizes(800), root.winfo_screenheight() - sizes(60))  # menu and title bar
        there = on_screen(root, self.settings.geometry)
        root.geometry(self.settings.geometry if there else f"{wide}x{high}")
        root.minsize(min(sizes(760), wide), min(sizes(500), high))
        root.protocol("WM_DELETE_WINDOW", self.close)
        root.deiconify()
        for milliseconds, call in ((POLL, self._poll), (TICK, self._tick), (WATCH, self._watch)):
            self._again(milliseconds, call)

    def show_desk(self) -> None:
        """Put the parts of a pair in the place of the welcome."""
        if self._welcoming:
            self._welcoming = False
            self.welcome.pack_forget()
            self.bench.pack(side="top", fill="x")
            self.panes.pack(fill="both", expand=True)
            self.root.update_idletasks()
            self.panes.place_dividers()
        self.sky.framed = self.strips.framed = True
        self.table.tree.focus_set()
        self._changed(frozenset((PAIR, ORBIT, SELECTION, VIEW, FILE)))

    # -- what is allowed -----------------------------------------------------------------------

    def on_desk(self) -> bool:
        return not self._welcoming

    def has_measures(self) -> bool:
        return self.on_desk() and len(self.model.pair.measures) > 0

    def has_orbit(self) -> bool:
        return self.on_desk() and self.model.elements is not None

    def has_selection(self) -> bool:
        return self.on_desk() and bool(self.model.selection)

    def has_orbit_and_measures(self) -> bool:
        return self.has_orbit() and self.has_measures()

    # -- following the model -------------------------------------------------------------------

    def _changed(self, kinds: frozenset[str]) -> None:
        for view in self.views:
            view.on_change(kinds)
        if kinds & {PAIR, FILE}:
            mark = "\u2022 " if self.model.unsaved else ""
            where = "" if self.model.path is None else f" \u2013 {self.model.path.name}"
            name = "" if self._welcoming else f"{mark}{self.model.pair.name}{where} \u2013 "
            self.root.title(f"{name}relorbit")
            self.bench.show(self.model)
        self.commands.refresh()

    def _wear(self) -> None:
        for view in self.views:
            view.wear(self.palette)
        self.commands.recolour(self.palette)
        for menu in (self.bar, self.context, *self._submenus):
            dress_menu(menu, self.palette)
        self.bench.wear(self.palette)

    def others(self) -> Mapping[str, Elements]:
        """Orbits on record to be shown beside the current one."""
        if not self.show_others:
            return {}
        return {one.name: one.elements for one in self.model.pair.orbits
                if one.elements != self.model.elements}  # fmt: skip

    def undo(self) -> None:
        self.say(f"Undone: {self.model.undo_label}.")
        self.model.undo()

    def redo(self) -> None:
        self.say(f"Done again: {self.model.redo_label}.")
        self.model.redo()

    # -- the view ------------------------------------------------------------------------------

    def toggle_dark(self) -> None:
        self.settings.dark = not self.settings.dark
        self.palette = PALETTES["dark" if self.settings.dark else "light"]
        dress(self.root, self.palette)
        self._wear()

    def help(self) -> None:
        show_help(self.root, self.palette, self.commands.all)

    def menu_at(self, x: int, y: int) -> None:
        """The menu of the selection."""
        self.context.delete(0, "end")
        for name in ("flip", "aside", "use", "doubt", "edit_cell", "copy", "reset"):
            self.commands.entry(self.context, name)
        self.context.tk_popup(x, y)

    # -- saying and asking ---------------------------------------------------------------------

    def say(self, words: str, warn: bool = False) -> None:
        self.status.say(words, warn)

    def ask(self, title: str, words: str, buttons: Sequence[str] = ("OK",)) -> str | None:
        return dialogs.tell(self.root, self.palette, title, words, buttons)

    def fill_in(self, title: str, fields: Sequence[dialogs.Field], take: Callable[..., object],
                ok: str, intro: str = "") -> bool:  # fmt: skip
        return dialogs.fill_in(self.root, self.palette, title, fields, take, ok, intro)

    @contextmanager
    def refusals(self, title: str) -> Iterator[None]:
        """Show what is refused inside, in its own words."""
        try:
            yield
        except RelorbitError as error:
            self.ask(title, words_of(error))

    def put_on_clipboard(self, text: str) -> None:
        self.root.clipboard_clear()
        self.root.clipboard_append(text)

    def ephemeris_text(self, first: str, last: str, step: str) -> str:
        return self.session.ephemeris_text(first, last, step)

    # -- work and the end ----------------------------------------------------------------------

    def start(self, label: str, work: Callable[..., Any], done: Callable[[Outcome], None]) -> None:
        """Begin work in the background."""
        self.say("")
        self.worker.start(label, work, done)
        self.bench.busy(label)
        self.commands.refresh()

    def end_work(self) -> bool:
        """End what runs in the background, after asking; False when it is to go on."""
        if not self.worker.busy:
            return True
        words = f"{self.worker.label} is still going on. Stop it?"
        if self.ask("Work goes on", words, ("Stop it", "Let it go on")) != "Stop it":
            return not self.worker.busy
        self.worker.cancel()
        self.worker.wait(PATIENCE)
        self.worker.poll()
        return True

    def _poll(self) -> None:
        self._again(POLL, self._poll)
        if self.worker.busy:
            self.bench.progress(self.worker.share)
            try:
                self.worker.poll()
            finally:
                if not self.worker.busy:
                    self.bench.idle()
                    self.commands.refresh()

    def _tick(self) -> None:
        self._again(TICK, self._tick)
        words = self.session.tick(time.monotonic())
        if words:
            self.say(words, warn=True)

    def _watch(self) -> None:
        self._again(WATCH, self._watch)
        self.files.watch()

    def _again(self, milliseconds: int, call: Callable[[], None]) -> None:
        """Call it once more in a while, until the window closes."""
        self._waiting[call.__name__] = self.root.after(milliseconds, call)

    def _fault(self, kind: type, fault: BaseException, trace: TracebackType | None) -> None:
        """A fault of our own: written down, said once, and the window lives on."""
        if isinstance(fault, KeyboardInterrupt):
            self._end()
            return
        if isinstance(fault, RelorbitError):
            self.ask("Not done", words_of(fault))
            return
        words = report_fault()
        if not self._faulty:
            self._faulty = True
            try:
                self.ask("A fault", f"{words[:1].upper()}{words[1:]}\n\nYour work is still here; "
                         "it is best to save it under another name.")  # fmt: skip
            finally:
                self._faulty = False

    def close(self) -> None:
        """Ask what must be asked, and end."""
        if self.files.may_leave():
            self._end()

    def _end(self) -> None:
        self._closing = True
        for waiting in self._waiting.values():
            self.root.after_cancel(waiting)
        self.settings.geometry = self.root.winfo_geometry()
        self.settings.orientation = self.model.orientation
        if not self._welcoming:
            self.panes.remember()
        with suppress(InputError):
            self.session.close()
        self.root.destroy()


def run(path: Path | None) -> int:
    """Open the window, with a pair where `path` names one, and stay until it is closed."""
    desk = Desk()
    desk.welcome.offer(desk.settings.recent)
    if path is not None:
        desk.root.after_idle(lambda: desk.files.open_path(path))
    else:
        desk.root.after_idle(desk.files.offer_rescue)
    desk.root.mainloop()
    return 0
