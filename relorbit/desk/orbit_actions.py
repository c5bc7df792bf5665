"""What can be done with orbits: fits in the background, alternatives, the record."""

from __future__ import annotations

from collections.abc import Mapping
from datetime import UTC, datetime
from typing import TYPE_CHECKING

from relorbit import __version__
from relorbit.desk.commands import Command
from relorbit.desk.dialogs import Field
from relorbit.desk.words import words_of
from relorbit.desk.worker import Outcome
from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements
from relorbit.solve.solver import refine_from, solve

if TYPE_CHECKING:
    from relorbit.desk.window import Desk


class OrbitActions:
    """Handlers, and the commands that name them."""

    def __init__(self, desk: Desk) -> None:
        self.desk = desk

    def commands(self) -> tuple[Command, ...]:
        d = self.desk
        return (
            Command("solve", "Solve without a guess", "Orbit", "F5", self.solve, self._may_fit,
                    "Solve"),
            Command("refine", "Refine from here", "Orbit", "F6", self.refine,
                    lambda: d.has_orbit() and self._may_fit(), "Refine from here"),
            Command("stop", "Stop the work", "Orbit", "Control-period", self.stop,
                    lambda: d.worker.busy, "Cancel"),
            Command("previous", "Previous orbit found", "Orbit", "bracketleft",
                    lambda: self.step(-1), lambda: self._may_step(-1), "\u2039 Previous"),
            Command("following", "Next orbit found", "Orbit", "bracketright",
                    lambda: self.step(1), lambda: self._may_step(1), "Next \u203a"),
            Command("take_up", "Work on the orbit chosen in the list", "Orbit", "Control-l",
                    self.take_up, lambda: d.follows.orbits.chosen is not None, "Work on it"),
            Command("keep", "Keep on record\u2026", "Orbit", "Control-k", self.keep, d.has_orbit,
                    "Keep\u2026"),
            Command("drop", "Take off the record\u2026", "Orbit", "Control-K", self.drop,
                    lambda: self._recorded() is not None, "Take off"),
            Command("copy_elements", "Copy the elements", "Orbit", "Control-e", self.copy_elements,
                    d.has_orbit),
            Command("copy_residuals", "Copy the residuals", "Orbit", "Control-C",
                    self.copy_residuals, d.has_orbit),
            Command("copy_ephemeris", "Copy the ephemeris", "Orbit", "Control-P",
                    self.copy_ephemeris, d.has_orbit, "Copy"),
        )  # fmt: skip

    # -- fits ----------------------------------------------------------------------------------

    def _may_fit(self) -> bool:
        return self.desk.has_measures() and not self.desk.worker.busy

    def solve(self) -> None:
        model = self.desk.model
        pair, held = model.pair, model.held_values()
        self.desk.start(
            "Solving",
            lambda report: solve(pair, held or None, on_progress=report),
            lambda outcome: self._solved(outcome, pair),
        )

    def refine(self) -> None:
        model = self.desk.model
        pair, elements, held = model.pair, model.elements, model.held_values()
        self.desk.start(
            "Refining",
            lambda report: refine_from(pair, elements, held or None),
            lambda outcome: self._solved(outcome, pair, searched=False),
        )

    def stop(self) -> None:
        self.desk.worker.cancel()
        self.desk.say("Stopping\u2026")

    def _solved(self, outcome: Outcome, pair: Pair, searched: bool = True) -> None:
        model = self.desk.model
        if outcome.result is None:
            self._not_solved(outcome)
        elif pair is model.pair:
            model.adopt(outcome.result, searched)
            many = len(outcome.result.alternatives)
            more = f" {many} other orbits fit too: [ and ] step through them." if many else ""
            self.desk.say(f"Done.{more}")
        else:
            model.set_elements(outcome.result.elements, "solve")
            self.desk.say("The measures were changed while this was worked on, so the errors do "
                          "not hold: Refine from here gives them.")  # fmt: skip

    def _not_solved(self, outcome: Outcome) -> None:
        if outcome.cancelled:
            self.desk.say("Stopped; nothing was changed.")
        elif isinstance(outcome.error, Undetermined):
            self._undetermined(outcome.error)
        elif outcome.error is not None:
            self.desk.ask("Not solved", words_of(outcome.error))
        elif outcome.fault is not None:
            raise outcome.fault

    def _undetermined(self, error: Undetermined) -> None:
        """Say why, and offer to look at one of the many orbits that fit."""
        example = error.known.get("best_of_many")
        look = "Look at one of many"
        buttons = ("OK", look) if example else ("OK",)
        words = f"Not determined: {words_of(error)}"
        self.desk.say("The measures do not determine the orbit.")
        if self.desk.ask("Not determined", words, buttons) == look:
            self.desk.model.set_elements(Elements(**example), "take up one of many orbits")
            self.desk.say("One of many orbits that fit: not a result.")

    # -- alternatives and the record -----------------------------------------------------------

    def _may_step(self, step: int) -> bool:
        state = self.desk.model.state
        found = state.found
        return found is not None and 0 <= state.chosen + step <= len(found.alternatives)

    def step(self, step: int) -> None:
        """Show another of the orbits found."""
        self.desk.model.choose(self.desk.model.state.chosen + step)

    def take_up(self) -> None:
        self.desk.follows.orbits.take_up()

    def _recorded(self) -> str | None:
        """The name of the orbit on record that is chosen in the list."""
        chosen = self.desk.follows.orbits.chosen
        there = {orbit.name for orbit in self.desk.model.pair.orbits}
        return chosen[1] if chosen and chosen[0] == "record" and chosen[1] in there else None

    def keep(self) -> None:
        names = {orbit.name for orbit in self.desk.model.pair.orbits}
        today = datetime.now(UTC).date().isoformat()
        name, number = f"orbit {today}", 2
        while name in names:
            name, number = f"orbit {today} ({number})", number + 1
        fields = (Field("name", "Name", name), Field("note", "Note"))
        words = "Keep this orbit with the pair. An orbit of the same name is replaced."
        self.desk.fill_in("Keep on record", fields, self._keep, "Keep", words)

    def _keep(self, said: Mapping[str, str]) -> None:
        today = datetime.now(UTC).date().isoformat()
        self.desk.model.keep(said["name"], said["note"], today, f"relorbit {__version__}")
        self.desk.say(f"On record as {said['name'].strip()}. Save the pair to keep it for good.")

    def drop(self) -> None:
        name = self._recorded()
        words = f"Take {name} off the record of this pair? Undo brings it back."
        take = "Take off the record"
        if self.desk.ask("Take off the record", words, (take, "Cancel")) == take:
            self.desk.model.drop_recorded(name)

    # -- copies --------------------------------------------------------------------------------

    def copy_elements(self) -> None:
        self.desk.put_on_clipboard(self.desk.session.elements_text())
        self.desk.say("The elements are on the clipboard.")

    def copy_residuals(self) -> None:
        self.desk.put_on_clipboard(self.desk.session.residuals_text())
        self.desk.say("The residuals are on the clipboard.")

    def copy_ephemeris(self) -> None:
        with self.desk.refusals("Not copied"):
            self.desk.put_on_clipboard(self.desk.ephemeris_text(*self.desk.follows.ephemeris.asked))
            self.desk.say("The ephemeris is on the clipboard.")
