"""All orbits that fit: samples in the background, a sheaf on the sky, a table, files."""

from __future__ import annotations

from collections.abc import Callable
from tkinter import filedialog
from typing import TYPE_CHECKING

from matplotlib.figure import Figure

from relorbit.derive.epochs import band_epochs
from relorbit.derive.posterior import sampled_ephemeris, summary
from relorbit.desk.commands import Command
from relorbit.desk.words import words_of
from relorbit.desk.worker import Outcome
from relorbit.errors import Undetermined
from relorbit.measures.pair import Pair
from relorbit.show.corner_plot import corner_of_samples
from relorbit.show.posterior_text import posterior_text
from relorbit.show.sampled_plots import ephemeris_bands, mass_histogram, sheaf_of_orbits
from relorbit.solve.posterior import Posterior
from relorbit.solve.residuals import residuals
from relorbit.solve.sample import sample
from relorbit.solve.saved_samples import check_samples_name

if TYPE_CHECKING:
    from relorbit.desk.window import Desk

SIZE, SEED = 10_000, 0
BAND_SAMPLES = 4000  # orbits followed for the bands in time
KINDS = (("ECSV", "*.ecsv"), ("FITS", "*.fits"))


class SampleActions:
    """Handlers, and the commands that name them."""

    def __init__(self, desk: Desk) -> None:
        self.desk = desk

    def commands(self) -> tuple[Command, ...]:
        d = self.desk
        return (
            Command("sample", "Sample all orbits that fit", "Orbit", "F7", self.sample,
                    lambda: d.has_measures() and not d.worker.busy, "Sample"),
            Command("sheaf", "Sampled orbits: show, hide", "View", "a", self.toggle_sheaf,
                    self.are_there),
            Command("save_samples", "Save the samples\u2026", "File", "Control-F7", self.save,
                    self.are_there, "Save\u2026"),
        )  # fmt: skip

    def are_there(self) -> bool:
        return self.desk.on_desk() and self.desk.model.samples is not None

    def sample(self) -> None:
        pair, year = self.desk.model.pair, self.desk.year

        def work(report: Callable[[float], None]) -> tuple[Posterior, str]:
            posterior = sample(pair, SIZE, SEED, on_progress=report)
            return posterior, posterior_text(posterior, summary(posterior, year), narrow=True)

        self.desk.start("Sampling", work, lambda outcome: self._sampled(outcome, pair))

    def _sampled(self, outcome: Outcome, pair: Pair) -> None:
        desk = self.desk
        if outcome.cancelled:
            desk.say("Stopped; nothing was changed.")
        elif isinstance(outcome.error, Undetermined):
            desk.say("There are no samples.")
            desk.ask("Not sampled", words_of(outcome.error))
        elif outcome.error is not None:
            desk.ask("Not sampled", words_of(outcome.error))
        elif outcome.fault is not None:
            raise outcome.fault
        elif desk.model.keep_samples(*outcome.result, pair):
            desk.follows.show_samples()
            desk.say("All orbits that fit: the table has their intervals, the sky plane a sheaf "
                     "of them; A hides it.")  # fmt: skip
        else:
            desk.say("The measures were changed while this was worked on: sample again.")

    def toggle_sheaf(self) -> None:
        self.desk.model.look(sheaf=not self.desk.model.sheaf)

    def save(self) -> None:
        path = filedialog.asksaveasfilename(
            parent=self.desk.root, title="Save the samples", defaultextension=".ecsv",
            initialfile=f"{self.desk.session.suggested_path().stem}_samples.ecsv", filetypes=KINDS,
        )  # fmt: skip
        if path:
            with self.desk.refusals("Not saved"):
                check_samples_name(path)
                self.desk.model.samples.write(path)
                self.desk.say(f"Saved: {path}")

    def figures(self) -> dict[str, Callable[[], Figure]]:
        """Figures of the samples by their names; none while there are no samples."""
        posterior, pair = self.desk.model.samples, self.desk.model.pair
        if posterior is None:
            return {}

        def bands() -> Figure:
            epochs = band_epochs(posterior.observations.epoch)
            of = residuals(posterior.best, pair.measures)
            coming = sampled_ephemeris(posterior, epochs, BAND_SAMPLES)
            return ephemeris_bands(coming, of, title=pair.name)

        makers = {
            "the samples two by two": lambda: corner_of_samples(posterior),
            "a sheaf of sampled orbits": lambda: sheaf_of_orbits(
                posterior, pair.measures, title=pair.name,
                orientation=self.desk.model.orientation,
            ),
            "theta and rho with 68 and 95 % bands": bands,
        }  # fmt: skip
        if posterior.parallax is not None:
            makers["the total mass of the samples"] = lambda: mass_histogram(posterior)
        return makers
