"""Files: open, save, read, unsaved work, figures and tables out."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import datetime
from pathlib import Path
from tkinter import filedialog
from typing import TYPE_CHECKING

from matplotlib.figure import Figure

from relorbit.cli.common import as_solution
from relorbit.derive.ephemeris import ephemeris, turning_points
from relorbit.derive.epochs import coming_years
from relorbit.desk.commands import Command
from relorbit.desk.dialogs import Field
from relorbit.desk.session import CHANGED, VANISHED, ChangedOnDisk
from relorbit.desk.words import words_of
from relorbit.errors import InputError
from relorbit.measures.files import write_text_atomically
from relorbit.measures.pair import RecordedOrbit
from relorbit.measures.table import TECHNIQUES
from relorbit.orbit.elements import Elements
from relorbit.show.files import check_format, save_figure
from relorbit.show.orbit_plot import apparent_orbit
from relorbit.show.residual_plot import residuals_over_time
from relorbit.show.sheet import sheet
from relorbit.show.time_plot import over_time

if TYPE_CHECKING:
    from relorbit.desk.window import Desk

PAIRS = (("pair files and lists", "*.ecsv *.csv *.tsv *.txt *.dat"), ("all files", "*"))
FIGURES = ("the apparent orbit", "theta and rho against time", "the residuals",
           "a sheet to print")  # fmt: skip
KINDS = (("PNG", "*.png"), ("PDF", "*.pdf"), ("SVG", "*.svg"))
YEARS = 10


class FileActions:
    """Handlers, and the commands that name them."""

    def __init__(self, desk: Desk) -> None:
        self.desk = desk
        self._told = ""

    def commands(self) -> tuple[Command, ...]:
        d = self.desk
        return (
            Command("new", "New pair", "File", "Control-n", self.new, button="New pair"),
            Command("open", "Open\u2026", "File", "Control-o", self.open_chosen,
                    button="Open a pair\u2026"),
            Command("read", "Read a list of measures\u2026", "File", "Control-r", self.read,
                    button="Read a list\u2026"),
            Command("save", "Save", "File", "Control-s", self.save, d.on_desk),
            Command("save_as", "Save as\u2026", "File", "Control-S", self.save_as, d.on_desk),
            Command("reload", "Read the file anew", "File", "Control-R", self.reload,
                    lambda: d.model.path is not None),
            Command("figure", "Save a figure\u2026", "File", "Control-g", self.figure, d.has_orbit),
            Command("save_ephemeris", "Save the ephemeris\u2026", "File", "Control-E",
                    self.save_ephemeris, d.has_orbit, "Save\u2026"),
        )  # fmt: skip

    # -- opening -------------------------------------------------------------------------------

    def may_leave(self) -> bool:
        """Whether the pair on the desk may go: saved, or given up knowingly; work is ended."""
        desk = self.desk
        if desk.model.unsaved:
            words = f"{desk.model.pair.name} has unsaved changes."
            answer = desk.ask("Unsaved changes", words, ("Save", "Do not save", "Cancel"))
            if answer == "Save":
                self.save()
                if desk.model.unsaved:
                    return False
            elif answer != "Do not save":
                return False
        return desk.end_work()

    def new(self) -> None:
        if self.may_leave():
            self.desk.session.new_pair()
            self.desk.show_desk()
            self.desk.say("Give the pair its name and parallax in Edit, About the pair. Paste "
                          "measures, or read a list.")  # fmt: skip

    def open_chosen(self) -> None:
        path = filedialog.askopenfilename(
            parent=self.desk.root, title="Open a pair", filetypes=PAIRS
        )
        if path:
            self.open_path(path)

    def open_path(self, path: str | Path) -> None:
        """Open a file, after asking what becomes of the pair on the desk."""
        if self.may_leave():
            with self.desk.refusals("Not opened"):
                self.desk.session.open_file(path)
                self.desk.show_desk()
                self.offer_rescue()

    def open_example(self, name: str) -> None:
        if self.may_leave():
            with self.desk.refusals("Not opened"):
                self.desk.session.open_example(name)
                self.desk.show_desk()
                self.desk.say("An invented pair. Press Solve.")

    def read(self) -> None:
        """Read lists into the pair on the desk, or into a new one from the welcome."""
        paths = filedialog.askopenfilenames(
            parent=self.desk.root, title="Read lists of measures", filetypes=PAIRS
        )
        if paths:
            self._read(paths)

    def _read(self, paths: tuple[str, ...]) -> None:
        fields = (
            Field("equinox", "Equinox of the angles", "date", ("date", "J2000"),
                  "of rows that do not say"),
            Field("technique", "Technique", "", TECHNIQUES, "of rows that do not say"),
            Field("observer", "Observer", hint="of rows that do not say"),
            Field("layout", "Layout file", hint="may stay empty"),
        )  # fmt: skip
        reports = []

        def take(said: Mapping[str, str]) -> None:
            if not self.desk.on_desk():
                self.desk.session.new_pair(Path(paths[0]).stem)
                self.desk.show_desk()
            given = {name: text.strip() or None for name, text in said.items()}
            reports.append(self.desk.session.read_lists(paths, **given).text)

        names = ", ".join(Path(path).name for path in paths)
        if self.desk.fill_in("Read a list", fields, take, "Read", names):
            self.desk.ask("Read", reports[0])

    def reload(self) -> None:
        with self.desk.refusals("Not read"):
            self.desk.session.reload()
            self.desk.say("Read anew; undo brings back what was here.")

    # -- saving --------------------------------------------------------------------------------

    def save(self) -> None:
        if self.desk.session.needs_name:
            self.save_as()
        else:
            self._save(None)

    def save_as(self) -> None:
        suggested = self.desk.session.suggested_path()
        path = filedialog.asksaveasfilename(
            parent=self.desk.root, title="Save the pair", initialfile=suggested.name,
            initialdir=str(suggested.parent), defaultextension=".ecsv",
            filetypes=(("pair files", "*.ecsv"), ("all files", "*")),
        )  # fmt: skip
        if path:
            self._save(Path(path))

    def _save(self, path: Path | None, force: bool = False) -> None:
        try:
            target = self.desk.session.save(path, force)
        except ChangedOnDisk as error:
            self._changed(words_of(error), path)
        except InputError as error:
            self.desk.ask("Not saved", f"{words_of(error)}\n\nNothing is lost: the work stays on "
                          "the desk.")  # fmt: skip
        else:
            self.desk.say(f"Saved: {target}")

    def _changed(self, words: str, path: Path | None) -> None:
        buttons = ("Save as\u2026", "Read the file anew", "Overwrite it", "Cancel")
        answer = self.desk.ask("The file was changed", words, buttons)
        if answer == buttons[0]:
            self.save_as()
        elif answer == buttons[1]:
            self.reload()
        elif answer == buttons[2]:
            self._save(path, force=True)

    def watch(self) -> None:
        """Notice what another window or program does to the file; said once."""
        state = self.desk.session.changed_on_disk()
        if state == self._told:
            return
        self._told = state
        if state == VANISHED:
            self.desk.say("The file has gone from the disk. The pair is still here: Save writes "
                          "it anew.", warn=True)  # fmt: skip
        elif state == CHANGED:
            self.desk.say("The file was changed on disk by another window or program. File, Read "
                          "the file anew.", warn=True)  # fmt: skip

    # -- unsaved work of an earlier run --------------------------------------------------------

    def offer_rescue(self) -> None:
        """Ask what becomes of work that a crash left behind."""
        for left in self.desk.session.found():
            when = datetime.fromtimestamp(left.written).strftime("%Y-%m-%d %H:%M")
            name = "a pair that was never saved" if left.path is None else left.path.name
            words = (f"Unsaved work on {name} is left from {when}: relorbit did not end as it "
                     "should.")  # fmt: skip
            if left.file_is_newer:
                words += " The file has been changed since; saving would undo that."
            answer = self.desk.ask("Unsaved work", words, ("Restore", "Discard", "Later"))
            if answer == "Discard":
                self.desk.session.discard(left)
            elif answer == "Restore":
                with self.desk.refusals("Not restored"):
                    self.desk.session.restore(left)
                    self.desk.show_desk()
                return

    # -- figures and tables out ----------------------------------------------------------------

    def figure(self) -> None:
        names = (*FIGURES, *self.desk.sampling.figures())
        fields = (Field("which", "Figure", names[0], names),)
        chosen = {}
        if not self.desk.fill_in("Save a figure", fields, chosen.update, "Choose a name\u2026"):
            return
        path = filedialog.asksaveasfilename(
            parent=self.desk.root, title="Save a figure", filetypes=KINDS, defaultextension=".png",
            initialfile=f"{self.desk.session.suggested_path().stem}.png",
        )  # fmt: skip
        if path:
            self.save_figure_as(chosen["which"], path)

    def save_figure_as(self, which: str, path: str) -> None:
        """Write one of `FIGURES`, or a figure of the samples."""
        with self.desk.refusals("Not saved"):
            check_format(path)
            save_figure(self._figure(which), path)
            self.desk.say(f"Saved: {path}")

    def _figure(self, which: str) -> Figure:
        of_samples = self.desk.sampling.figures()
        if which in of_samples:
            return of_samples[which]()
        model, year = self.desk.model, self.desk.year
        pair, orbit, elements = model.pair, model.orbit, model.elements
        of = model.consequences.residuals
        if which == FIGURES[1]:
            return over_time(elements, residuals=of, title=pair.name)
        if which == FIGURES[2]:
            return residuals_over_time(of, title=pair.name)
        if which == FIGURES[3]:
            if isinstance(orbit, Elements):
                orbit = RecordedOrbit("not fitted", elements)
            points = turning_points(orbit, year)
            coming = ephemeris(orbit, coming_years(year, YEARS))
            solution = as_solution(pair, orbit)
            return sheet(solution, pair, coming, points, orientation=model.orientation)
        if which != FIGURES[0]:
            raise InputError(f"{which!r} is not a figure; choose one of the list")
        return apparent_orbit(elements, residuals=of, orientation=model.orientation,
                              title=pair.name, others=self.desk.others())  # fmt: skip

    def save_ephemeris(self) -> None:
        with self.desk.refusals("Not saved"):
            text = self.desk.ephemeris_text(*self.desk.follows.ephemeris.asked)
            stem = self.desk.session.suggested_path().stem
            path = filedialog.asksaveasfilename(
                parent=self.desk.root, title="Save the ephemeris", defaultextension=".txt",
                initialfile=f"{stem}_ephemeris.txt", filetypes=(("text", "*.txt"),),
            )  # fmt: skip
            if path:
                write_text_atomically(path, text.rstrip() + "\n")
                self.desk.say(f"Saved: {path}")
