"""The files behind the desk: opening, saving, taking measures in, keeping unsaved work safe.

It knows no widget. All methods belong to the window's thread.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from contextlib import suppress
from dataclasses import dataclass
from os import PathLike, fspath
from pathlib import Path

from relorbit.cli.common import today
from relorbit.cli.demo import example
from relorbit.derive.ephemeris import AnyOrbit, ephemeris, turning_points
from relorbit.derive.epochs import chosen_epochs
from relorbit.desk import pasting, rescue
from relorbit.desk.model import DeskModel
from relorbit.desk.rescue import Autosave, Rescue
from relorbit.desk.settings import Settings
from relorbit.desk.watch import CHANGED, UNCHANGED, VANISHED, FileWatch
from relorbit.errors import InputError
from relorbit.measures import cells, ecsv
from relorbit.measures.files import read_text, write_text_atomically
from relorbit.measures.intake import Intake, merge, read_list
from relorbit.measures.pair import Pair, RecordedOrbit, new_pair
from relorbit.measures.reduction import reduce_pair
from relorbit.measures.store import pair_text, read_pair
from relorbit.show import text as show
from relorbit.show.intake_text import intake_text

__all__ = ["CHANGED", "EXAMPLES", "UNCHANGED", "VANISHED", "ChangedOnDisk", "Session", "Taken"]

EXAMPLES = (
    ("tarn_31.ecsv", "Tarn 31: one and a half revolutions, eyepiece, plate and camera"),
    ("quill_8.ecsv", "Quill 8: very eccentric, periastron poorly covered"),
    ("moss_144.ecsv", "Moss 144: nearly edge-on"),
    ("lantern_5.ecsv", "Lantern 5: nearly circular, seen almost face-on"),
    ("heron_77.ecsv", "Heron 77: a short arc"),
)
# with a tick every 2 s and a second for the writing, at most 7 s of edits are at stake
AUTOSAVE_EVERY_S = 4.0
NO_POSITION = (
    "enter right ascension and declination of the pair to bring it to J2000, or choose equinox "
    "J2000 where the rows are there already"
)


class ChangedOnDisk(InputError):
    """The file was changed by somebody else since it was read; saving would overwrite that."""


@dataclass(frozen=True)
class Taken:
    """What became of measures that were pasted or read from lists.

    Attributes
    ----------
    read, appended : int
        How many rows there were, and how many of them were new.
    reduced : int
        How many position angles were brought to J2000.
    text : str
        The whole report in words, several lines.
    """

    read: int
    appended: int
    reduced: int
    text: str


class Session:
    """The pair on the desk and its file.

    `open_file`, `new_pair`, `open_example` and `restore` put another pair on the desk and give up
    unsaved work: the window asks before.

    Attributes
    ----------
    model : DeskModel
    settings : Settings
    """

    def __init__(self, model: DeskModel, settings: Settings) -> None:
        self.model = model
        self.settings = settings
        self._watch = FileWatch()
        self._autosave = Autosave(settings.folder)
        self._kept: Pair | None = None  # the pair that the autosave holds
        self._next_autosave = float("-inf")
        self._failing = False
        self._from_list = False

    # -- opening -------------------------------------------------------------------------------

    def open_file(self, path: str | PathLike[str], allow_any_epoch: bool = False) -> None:
        """Open a pair file or a plain list.

        Raises InputError in the store's words; the desk then stays as it is.
        """
        watch = FileWatch()
        watch.read(path)
        pair = read_pair(path, allow_any_epoch=allow_any_epoch)
        self._put(pair, Path(path), watch)
        self.settings.remember(path)

    def new_pair(self, name: str = "new pair") -> None:
        """Put an empty pair without a file on the desk."""
        self._put(new_pair(name), None, FileWatch())

    def open_example(self, name: str = EXAMPLES[0][0]) -> None:
        """Put a shipped example (see `EXAMPLES`) on the desk, as a pair without a file."""
        self._put(read_pair(example(name)), None, FileWatch())

    def reload(self) -> None:
        """Take up the file as it is on disk now, as one step that undo takes back.

        Raises InputError when it cannot be read, or there is no file.
        """
        path = self._required_path()
        watch = FileWatch()
        watch.read(path)
        pair = read_pair(path, allow_any_epoch=True)
        self._watch = watch
        self.model.take_in(pair, "reload the file")
        self.model.saved(path)
        self._forget_kept()

    def _put(self, pair: Pair, path: Path | None, watch: FileWatch) -> None:
        self._forget_kept()
        self._watch, self._from_list = watch, _is_something_else(path)
        self.model.open(pair, path)

    # -- saving --------------------------------------------------------------------------------

    @property
    def needs_name(self) -> bool:
        """Whether `save` needs a path: the pair was never saved, or comes from a plain list."""
        return self.model.path is None or self._from_list

    def suggested_path(self) -> Path:
        """A name to save under: the file's own, or NAME.ecsv beside a list or for a new pair."""
        path = self.model.path
        if path is None:
            return Path((re.sub(r"[^\w.+-]+", "_", self.model.pair.name) or "pair") + ".ecsv")
        return path.with_suffix(".ecsv") if self._from_list else path

    def save(self, path: str | PathLike[str] | None = None, force: bool = False) -> Path:
        """Save the pair, whole or not at all; the last version is kept as NAME.previous.

        Parameters
        ----------
        path : path, optional
            Another name than the file has.
        force : bool
            Also when the file has been changed on disk since it was read or saved here.

        Returns
        -------
        Path
            Where it was saved.

        Raises
        ------
        ChangedOnDisk
            When it has; then `force`, `reload` or another name.
        InputError
            When there is no name yet, the target is no pair file (a plain list stays as it is), or
            it cannot be written. The work stays on the desk, and is kept safe by `tick`.
        """
        target = self._required_path() if path is None else Path(path)
        if _is_something_else(target):
            raise InputError(
                "is not a pair file and stays as it is; save the pair under another name, such as "
                f"{target.with_suffix('.ecsv').name}",
                path=target,
            )
        content = pair_text(self.model.pair).encode()
        if not force and self._watch.is_of(target) and self._watch.state() == CHANGED:
            raise ChangedOnDisk(
                "has been changed on disk since it was read here; reload it, save under another "
                "name, or overwrite it knowingly",
                path=target,
            )
        write_text_atomically(target, content, keep_previous=True)
        self._watch.wrote(target, content)
        self._from_list = False
        self.model.saved(target)
        self._forget_kept()
        self.settings.remember(target)
        return target

    def changed_on_disk(self) -> str:
        """`UNCHANGED`, `CHANGED` or `VANISHED`; cheap enough to call every second.

        A vanished file is written anew by `save`.
        """
        return self._watch.state()

    def _required_path(self) -> Path:
        if self.model.path is None:
            raise InputError("the pair has no file yet; save it under a name")
        return self.model.path

    # -- taking measures in --------------------------------------------------------------------

    def paste(self, text: str, columns: Sequence[str] = (), equinox: str | None = None) -> Taken:
        """Take in rows copied from a spreadsheet, a mail or our own table, as one step.

        Rows the pair has already are not taken twice. Where the position of the pair is known,
        position angles are brought to J2000.

        Parameters
        ----------
        text : str
            With a header line or without; see `relorbit.desk.pasting.read_pasted`.
        columns : sequence of str
            Columns of `Measures` in the order in which the table shows them.
        equinox : str, optional
            Of rows that do not say: "date", "J2000" or a year; by default of date, from space
            J2000.

        Raises
        ------
        InputError
            Naming the line of the pasted text; nothing is then taken in.
        """
        intake = pasting.read_pasted(text, columns, equinox)
        return self._take([(pasting.PASTED, intake)], "paste measures")

    def read_lists(
        self,
        paths: Iterable[str | PathLike[str]],
        layout: str | PathLike[str] | None = None,
        *,
        equinox: str | None = None,
        technique: str | None = None,
        observer: str | None = None,
        allow_any_epoch: bool = False,
    ) -> Taken:
        """Read lists into the pair on the desk, as one step; see `relorbit intake`.

        Raises InputError naming file, line and column; nothing is then taken in.
        """
        ways = {"equinox": equinox, "technique": technique, "observer": observer}
        ways["allow_any_epoch"] = allow_any_epoch
        intakes = [(fspath(path), read_list(path, layout, **ways)) for path in paths]
        return self._take(intakes, "read lists")

    def reduce(self) -> int:
        """Bring position angles that are still of date to J2000, as one step; how many there were.

        For when the position of the pair has become known; 0 while it is not.
        """
        pair, reduced = reduce_pair(self.model.pair)
        if reduced:
            self.model.take_in(pair, "bring theta to J2000")
        return reduced

    def _take(self, intakes: Sequence[tuple[str, Intake]], label: str) -> Taken:
        pair, reports = self.model.pair, []
        for source, intake in intakes:
            pair, merged = merge(pair, intake)
            reports.append((source, intake, merged))
        pair, reduced = reduce_pair(pair)
        appended = sum(merged.appended for _, _, merged in reports)
        if appended or reduced:
            self.model.take_in(pair, label)
        name = "on the desk" if self.model.path is None else self.model.path.name
        text = intake_text(name, pair, reports, reduced, NO_POSITION)
        return Taken(sum(m.read for _, _, m in reports), appended, reduced, text)

    # -- unsaved work --------------------------------------------------------------------------

    def tick(self, now: float) -> str | None:
        """Keep unsaved work safe where that is due.

        Parameters
        ----------
        now : float
            `time.monotonic`; call every 1 to 2 seconds.

        Returns
        -------
        str or None
            A line to show when keeping the work has begun to fail, or works again.
        """
        if not self.model.unsaved:
            self._forget_kept()
            return None
        if self.model.pair is self._kept or now < self._next_autosave:
            return None
        self._next_autosave = now + AUTOSAVE_EVERY_S
        failed, self._failing = self._failing, False
        try:
            self._autosave.write(self.model.pair, self.model.path)
        except InputError as error:
            self._failing = True
            return None if failed else f"unsaved work cannot be kept safe: {error}"
        self._kept = self.model.pair
        return "unsaved work is kept safe again" if failed else None

    def found(self) -> list[Rescue]:
        """Unsaved work that a crash left behind for the file on the desk, the latest first.

        While there is no file: of pairs that were never saved.
        """
        return rescue.found(self.model.path, self.settings.folder)

    def restore(self, left: Rescue) -> None:
        """Put rescued work on the desk, unsaved; undo shows the file's own.

        Raises InputError when it cannot be read; nothing is then changed.
        """
        pair = read_pair(left.file, allow_any_epoch=True)
        saved, watch = new_pair(pair.name), FileWatch()
        if left.path is not None:
            watch.read(left.path)
            with suppress(InputError):  # a file that has gone is written anew by `save`
                saved = read_pair(left.path, allow_any_epoch=True)
        self._autosave.adopt(left)
        self._watch = watch
        self._from_list = _is_something_else(left.path)
        self.model.restore(pair, left.path, saved)
        self._kept = self.model.pair

    def discard(self, left: Rescue) -> None:
        """Delete rescued work; raises InputError when it cannot be deleted."""
        rescue.discard(left, self.settings.folder)

    def _forget_kept(self) -> None:
        self._autosave.remove()
        self._kept, self._next_autosave = None, float("-inf")

    def close(self) -> None:
        """End cleanly: no unsaved work is kept, and the settings are saved where they can be."""
        self._autosave.close()
        with suppress(InputError):
            self.settings.save()

    # -- texts to take out ---------------------------------------------------------------------

    def table_text(self, rows: Iterable[int] | None = None, columns: Sequence[str] = ()) -> str:
        """Measures for the clipboard, all by default; see `relorbit.desk.pasting.table_text`."""
        measures = self.model.pair.measures
        rows = range(len(measures)) if rows is None else rows
        return pasting.table_text(measures, rows, columns)

    def elements_text(self) -> str:
        """The current elements as a table; raises InputError while there are none."""
        orbit = self._required_orbit()
        if isinstance(orbit, RecordedOrbit):
            return show.elements_table(orbit.elements, orbit.sigma)
        return show.elements_table(orbit)

    def residuals_text(self) -> str:
        """O-C of every measure as a table; raises InputError while there is no orbit."""
        self._required_orbit()
        return show.residuals_table(self.model.consequences.residuals)

    def ephemeris_text(self, first: str = "", last: str = "", step: str = "1 year") -> str:
        """Positions as a table, with the turning points of the orbit.

        Parameters
        ----------
        first, last : str
            Years or dates as typed; by default today, and ten steps later.
        step : str
            Such as "1 year", "6 months" or "30 days".

        Raises
        ------
        InputError
            For what cannot be read, or while there is no orbit.
        """
        orbit = self._required_orbit()
        epochs = chosen_epochs(None, first.strip() or None, last.strip() or None, step, today())
        points = turning_points(orbit, float(epochs[0]))
        parts = [show.ephemeris_table(ephemeris(orbit, epochs)), show.turning_points_table(points)]
        return "\n\n".join([*parts, "Theta at equinox J2000.\n"])

    def _required_orbit(self) -> AnyOrbit:
        if self.model.orbit is None:
            raise InputError("there is no orbit yet; solve first")
        return self.model.orbit


def _is_something_else(path: Path | None) -> bool:
    """True for a file that holds something, but no pair file: a plain list, a picture."""
    try:
        if path is None or not path.is_file() or not path.stat().st_size:
            return False
        return not ecsv.is_ecsv(cells.physical_lines(read_text(path)))
    except (InputError, OSError):
        return True
