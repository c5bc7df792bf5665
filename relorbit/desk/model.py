"""What the window works on: one pair, the current orbit, the selection, and their history.

The model knows no widget. Views subscribe to it and are told what kind of thing has changed; they
change it only through its methods. All methods belong to the window's thread.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from relorbit.derive.consequences import Consequences, consequences
from relorbit.derive.ephemeris import AnyOrbit
from relorbit.desk.results import Results
from relorbit.desk.topics import FILE, ORBIT, PAIR, SELECTION, VIEW
from relorbit.errors import InputError
from relorbit.measures import editing
from relorbit.measures.pair import Pair, RecordedOrbit, new_pair
from relorbit.orbit.elements import NAMES, Elements
from relorbit.solve.solution import Solution


@dataclass(frozen=True)
class State:
    """All that undo brings back: the pair and the orbit being worked on.

    Attributes
    ----------
    pair : Pair
    elements : Elements or None
        The current orbit, None before there is one.
    held : mapping of element name to value
        Elements that a fit keeps.
    solution : Solution or None
        The fit that the current elements come from, None once they are changed by hand.
    found : Solution or None
        The last complete solution, whose alternatives can be stepped through.
    chosen : int
        Which of its orbits is shown: 0 the best, 1 the first alternative.
    """

    pair: Pair
    elements: Elements | None = None
    held: Mapping[str, float] = field(default_factory=dict)
    solution: Solution | None = None
    found: Solution | None = None
    chosen: int = 0


@dataclass(frozen=True)
class Step:
    """One entry of the history: what was done, and the state after it."""

    label: str
    state: State


class DeskModel(Results):
    """One pair on the desk.

    Attributes
    ----------
    path : Path or None
        The pair file; None for a pair that was never saved.
    selection : frozenset of int
        Indices of selected measures.
    orientation : "sky" or "eyepiece"
    epoch : float
        Julian year of the time slider.
    by_phase : bool
        The strips run along the phase of the orbit instead of time.
    sheaf : bool
        Whether sampled orbits, where there are any, are drawn on the sky.
    """

    def __init__(self, pair: Pair | None = None, path: Path | None = None) -> None:
        self._listeners: list[Callable[[frozenset[str]], None]] = []
        self.orientation = "sky"
        self.by_phase = False
        self.sheaf = True
        self.epoch = 2000.0
        self.open(pair or new_pair("new pair"), path)

    # -- what there is -------------------------------------------------------------------------

    @property
    def state(self) -> State:
        return self._history[self._place].state

    @property
    def pair(self) -> Pair:
        return self.state.pair

    @property
    def elements(self) -> Elements | None:
        return self.state.elements

    @property
    def unsaved(self) -> bool:
        """Whether the pair differs from the file; the orbit being tried is not part of it."""
        return self.pair is not self._saved_pair

    @property
    def nudging(self) -> bool:
        """Whether the present orbit comes from a nudge, of which more may follow at once."""
        return (self.undo_label or "").startswith("nudge")

    @property
    def orbit(self) -> AnyOrbit | None:
        """The current orbit with all that is known of it: a fit, or one on record, or elements."""
        if self.state.solution is not None or self.elements is None:
            return self.state.solution
        recorded = (one for one in reversed(self.pair.orbits) if one.elements == self.elements)
        return next(recorded, self.elements)

    @property
    def undo_label(self) -> str | None:
        return self._history[self._place].label if self._place else None

    @property
    def redo_label(self) -> str | None:
        following = self._place + 1
        return self._history[following].label if following < len(self._history) else None

    @property
    def consequences(self) -> Consequences | None:
        """Residuals, chi2 and mass of the current orbit; None while there is no orbit."""
        if self.elements is None:
            return None
        if self._consequences is None or self._consequences[0] is not self.state:
            self._consequences = (self.state, consequences(self.pair, self.elements))
        return self._consequences[1]

    def subscribe(self, listener: Callable[[frozenset[str]], None]) -> Callable[[], None]:
        """Be told of changes, as a set of kinds; returns what ends the subscription."""
        self._listeners.append(listener)
        return lambda: self._listeners.remove(listener)

    # -- files ---------------------------------------------------------------------------------

    def open(self, pair: Pair, path: Path | None) -> None:
        """Put another pair on the desk; the history begins anew, with the last orbit on record."""
        elements = pair.orbits[-1].elements if pair.orbits else None
        self.path = path
        self.selection: frozenset[int] = frozenset()
        self._history = [Step("", State(pair, elements))]
        self._place = 0
        self._saved_pair = pair
        self.forget_results()
        self._consequences: tuple[State, Consequences] | None = None
        self._tell(PAIR, ORBIT, SELECTION, VIEW, FILE)

    def restore(self, pair: Pair, path: Path | None, saved: Pair) -> None:
        """Put a rescued pair on the desk, unsaved, over the file's own `saved` one."""
        self.open(saved, path)
        self._do("restore unsaved work", replace(self.state, pair=pair), PAIR, ORBIT, FILE)

    def saved(self, path: Path) -> None:
        """The pair has been written to `path`."""
        self.path = path
        self._saved_pair = self.pair
        self._tell(FILE)

    # -- history -------------------------------------------------------------------------------

    def undo(self) -> None:
        if self._place:
            self._place -= 1
            self._after_travel()

    def redo(self) -> None:
        if self._place + 1 < len(self._history):
            self._place += 1
            self._after_travel()

    def _after_travel(self) -> None:
        self._forget_lost_rows()
        self._tell(PAIR, ORBIT, SELECTION, FILE)

    def _forget_lost_rows(self) -> bool:
        """Take rows that are no longer there out of the selection; whether there were any."""
        count = len(self.pair.measures)
        kept = frozenset(row for row in self.selection if row < count)
        lost, self.selection = kept != self.selection, kept
        return lost

    def _do(self, label: str, state: State, *kinds: str, merge: bool = False) -> None:
        """Make `state` the present; `merge` replaces a step of the same label (a drag)."""
        current = self._history[self._place]
        del self._history[self._place + 1 :]
        if merge and self._place and current.label == label:
            self._history[self._place] = Step(label, state)
        else:
            self._history.append(Step(label, state))
            self._place += 1
        if self._forget_lost_rows():
            kinds = (*kinds, SELECTION)
        self._tell(*kinds)

    def _change_pair(self, label: str, pair: Pair, *more: str) -> None:
        if pair is not self.pair:
            state = replace(self.state, pair=pair, solution=None)
            self._do(label, state, PAIR, ORBIT, FILE, *more)

    # -- measures ------------------------------------------------------------------------------

    def select(self, rows: Iterable[int]) -> None:
        """Select measures; rows that there are not are left out."""
        count = len(self.pair.measures)
        rows = frozenset(row for row in rows if 0 <= row < count)
        if rows != self.selection:
            self.selection = rows
            self._tell(SELECTION)

    def edit_cell(self, row: int, column: str, text: str) -> None:
        """Change one cell; raises InputError for a value that cannot be."""
        self._change_pair(f"edit {column}", editing.with_cell(self.pair, row, column, text))

    def set_use(self, rows: Iterable[int], use: bool, reason: str = "") -> None:
        rows = frozenset(rows)
        if rows:
            label = "use measures" if use else "set measures aside"
            self._change_pair(label, editing.with_use(self.pair, rows, use, reason))

    def flip(self, rows: Iterable[int]) -> None:
        rows = frozenset(rows)
        if rows:
            self._change_pair("flip the quadrant", editing.with_flip(self.pair, rows))

    def add_measure(self, epoch: str, theta: str, rho: str, **others: str) -> None:
        """Append a typed measure; raises InputError for a value that cannot be."""
        self._change_pair(
            "add a measure", editing.with_measure(self.pair, epoch, theta, rho, **others)
        )

    def remove(self, rows: Iterable[int]) -> None:
        rows = frozenset(rows)
        if rows:
            self.selection = frozenset()
            self._change_pair("remove measures", editing.without(self.pair, rows), SELECTION)

    def take_in(self, pair: Pair, label: str = "read measures") -> None:
        """The pair as it is after measures were pasted or read into it."""
        self._change_pair(label, pair)

    def set_identity(self, **said: Any) -> None:
        """Name, position, parallax and so on; raises InputError for a value that cannot be."""
        self._change_pair("edit the pair", self.pair.with_identity(**said))

    # -- the orbit -----------------------------------------------------------------------------

    def set_elements(self, elements: Elements, label: str = "change elements") -> None:
        """Another orbit, typed or nudged; nudges in a row are one step of the history."""
        state = replace(self.state, elements=elements, solution=None)
        self._do(label, state, ORBIT, merge=label.startswith("nudge"))

    def set_held(self, name: str, held: bool) -> None:
        """Hold an element at its present value in fits, or free it."""
        values = dict(self.state.held)
        if held and self.elements is not None:
            values[name] = getattr(self.elements, name)
        else:
            values.pop(name, None)
        self._do(f"{'hold' if held else 'free'} {name}", replace(self.state, held=values), ORBIT)

    def held_values(self) -> dict[str, float]:
        """Held elements at the values they have now: what a fit is asked to keep."""
        if self.elements is None:
            return {}
        return {name: getattr(self.elements, name) for name in NAMES if name in self.state.held}

    def adopt(self, solution: Solution, searched: bool) -> None:
        """Take over the orbit of a fit; `searched` when it brings its alternatives."""
        state = replace(
            self.state,
            elements=solution.elements,
            solution=solution,
            found=solution if searched else self.state.found,
            chosen=0,
        )
        self._do("solve" if searched else "refine", state, ORBIT)

    def choose(self, index: int) -> None:
        """Show an orbit of the last complete solution: 0 the best, 1 the first alternative."""
        found = self.state.found
        if found is None or not 0 <= index <= len(found.alternatives):
            raise InputError("there is no such alternative; solve first")
        if index == 0:
            state = replace(self.state, elements=found.elements, solution=found, chosen=0)
        else:
            elements = found.alternatives[index - 1].elements
            state = replace(self.state, elements=elements, solution=None, chosen=index)
        self._do("choose an alternative", state, ORBIT)

    def use_recorded(self, name: str) -> None:
        """Work on an orbit on record."""
        self.set_elements(self.pair.orbit(name).elements, f"take up {name}")

    def keep(self, name: str, note: str, recorded: str, source: str) -> None:
        """Keep the current orbit on record under a name."""
        if self.elements is None:
            raise InputError("there is no orbit to keep; solve first")
        if not name.strip():
            raise InputError("an orbit on record needs a name")
        said = {"recorded": recorded, "source": source, "note": note.strip()}
        solution = self.state.solution
        if solution is not None and solution.elements == self.elements:
            record = solution.to_record(name.strip(), **said)
        else:
            record = RecordedOrbit(name.strip(), self.elements, **said)
        state = replace(self.state, pair=self.pair.with_orbit(record))
        self._do("keep the orbit", state, PAIR, ORBIT, FILE)

    def drop_recorded(self, name: str) -> None:
        """Take an orbit off the record."""
        orbits = tuple(orbit for orbit in self.pair.orbits if orbit.name != name)
        state = replace(self.state, pair=replace(self.pair, orbits=orbits))
        self._do("take an orbit off the record", state, PAIR, ORBIT, FILE)

    # -- the view ------------------------------------------------------------------------------

    def look(self, **changes: Any) -> None:
        """Change `orientation`, `epoch`, `by_phase` or `sheaf`; not part of the history."""
        for name, value in changes.items():
            if name not in ("orientation", "epoch", "by_phase", "sheaf"):
                raise TypeError(f"the view has no {name!r}")
            setattr(self, name, value)
        self._tell(VIEW)

    def _tell(self, *kinds: str) -> None:
        for listener in list(self._listeners):
            listener(frozenset(kinds))

