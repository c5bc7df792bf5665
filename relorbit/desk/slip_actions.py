"""Slips: looked for in the background, listed, put right and taken back."""

from __future__ import annotations

from typing import TYPE_CHECKING

from relorbit.desk.commands import Command
from relorbit.desk.words import sentence, words_of
from relorbit.desk.worker import Outcome
from relorbit.measures.pair import Pair
from relorbit.solve.vetted import vet

if TYPE_CHECKING:
    from relorbit.desk.window import Desk


class SlipActions:
    """Handlers, and the commands that name them."""

    def __init__(self, desk: Desk) -> None:
        self.desk = desk

    def commands(self) -> tuple[Command, ...]:
        d = self.desk
        return (
            Command("vet", "Look for slips", "Measures", "F8", self.vet,
                    lambda: d.has_measures() and not d.worker.busy, "Look for slips"),
            Command("mend", "Put right the slips chosen", "Measures", "m", self.mend,
                    lambda: bool(d.follows.slips.chosen), "Put right"),
            Command("mend_all", "Put right all slips found", "Measures", "Control-m",
                    self.mend_all, lambda: d.on_desk() and bool(d.model.findings), "All of them"),
            Command("unmend", "Take back what was put right", "Measures", "Control-M", self.unmend,
                    self._mended),
        )  # fmt: skip

    def _mended(self) -> bool:
        return self.desk.has_measures() and bool((self.desk.model.pair.measures.vetted != "").any())

    def vet(self) -> None:
        pair = self.desk.model.pair
        self.desk.start(
            "Looking for slips",
            lambda report: vet(pair, on_progress=report),
            lambda outcome: self._vetted(outcome, pair),
        )

    def _vetted(self, outcome: Outcome, pair: Pair) -> None:
        desk = self.desk
        if outcome.cancelled:
            desk.say("Stopped; nothing was changed.")
        elif outcome.error is not None:
            desk.ask("Not vetted", words_of(outcome.error))
        elif outcome.fault is not None:
            raise outcome.fault
        elif desk.model.keep_findings(outcome.result, pair):
            desk.follows.show_slips()
            count = len(outcome.result)
            many = f"{count} measures look" if count != 1 else "One measure looks"
            desk.say(f"{many} wrong: M puts right what is chosen, and undo takes it back."
                     if count else "No slip found.")  # fmt: skip
        else:
            desk.say("The measures were changed while this was worked on: look again.")

    def mend(self) -> None:
        self._mend(self.desk.follows.slips.chosen)

    def mend_all(self) -> None:
        self._mend(self.desk.model.findings)

    def _mend(self, findings: tuple) -> None:
        with self.desk.refusals("Not put right"):
            self.desk.model.mend(findings)
            self.desk.say("Put right; what was observed is kept. Solve again to see what it does "
                          "to the orbit.")  # fmt: skip

    def unmend(self) -> None:
        refused = self.desk.model.unmend()
        if refused:
            self.desk.ask("Taken back", "\n".join(sentence(line) for line in refused))
        else:
            self.desk.say("The measures are as they were received.")
