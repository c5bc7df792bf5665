"""What work in the background has found out about the measures: samples, and slips.

Both belong to the measures that they were made from: once these are changed they are outdated,
and an undo that brings the measures back brings them back too.
"""

from __future__ import annotations

from collections.abc import Iterable
from typing import TYPE_CHECKING

from relorbit.desk.topics import ORBIT, VIEW
from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures
from relorbit.measures.vetting import Finding, applied, undone

if TYPE_CHECKING:
    from relorbit.solve.posterior import Posterior


class Results:
    """The part of the model that keeps such results; `DeskModel` completes it."""

    if TYPE_CHECKING:
        pair: Pair

        def _tell(self, *kinds: str) -> None: ...

        def _change_pair(self, label: str, pair: Pair, *more: str) -> None: ...

    def forget_results(self) -> None:
        """For another pair."""
        self._samples: tuple[Pair, Posterior, str] | None = None
        self._findings: list[tuple[Measures, tuple[Finding, ...]]] = []

    @property
    def samples(self) -> Posterior | None:
        """All orbits that fit the measures as they are now; None before they are sampled."""
        return self._samples[1] if self._sampled() else None

    @property
    def samples_text(self) -> str:
        """What there is to say of the samples, "" while there are none."""
        return self._samples[2] if self._sampled() else ""

    @property
    def samples_outdated(self) -> bool:
        """Whether there are samples, of measures that have been changed since."""
        return self._samples is not None and not self._sampled()

    def _sampled(self) -> bool:
        return self._samples is not None and _same_data(self._samples[0], self.pair)

    def keep_samples(self, posterior: Posterior, text: str, pair: Pair) -> bool:
        """Put samples of `pair` beside the orbit; False where they are not of these measures."""
        if not _same_data(pair, self.pair):
            return False
        self._samples = pair, posterior, text
        self._tell(ORBIT, VIEW)
        return True

    @property
    def findings(self) -> tuple[Finding, ...] | None:
        """Slips found in the measures as they are now; None before they are looked for."""
        there = (found for measures, found in self._findings if measures is self.pair.measures)
        return next(there, None)

    @property
    def findings_outdated(self) -> bool:
        """Whether slips were looked for, in measures that have been changed since."""
        return bool(self._findings) and self.findings is None

    def keep_findings(self, findings: Iterable[Finding], pair: Pair) -> bool:
        """Put slips found in `pair` beside it; False where its measures are others by now."""
        if pair.measures is not self.pair.measures:
            return False
        self._findings = [(pair.measures, tuple(findings))]
        self._tell(ORBIT)
        return True

    def mend(self, findings: Iterable[Finding]) -> None:
        """Put slips right, as one step; raises InputError where they do not hold any more."""
        chosen, listed = tuple(findings), self.findings or ()
        pair = applied(self.pair, chosen)
        if pair is not self.pair:
            # others that were found stay in the list, and undo finds its own list again
            left = tuple(one for one in listed if one not in chosen)
            self._findings.insert(0, (pair.measures, left))
            self._change_pair("put slips right", pair)

    def unmend(self) -> tuple[str, ...]:
        """Take back what was put right; in words what was edited since and stays."""
        pair, refused = undone(self.pair)
        self._change_pair("take back what was put right", pair)
        return refused

def _same_data(one: Pair, other: Pair) -> bool:
    """Whether samples of one pair are samples of the other too."""
    return one.measures is other.measures and (
        (one.parallax_mas, one.parallax_err_mas) == (other.parallax_mas, other.parallax_err_mas)
    )
