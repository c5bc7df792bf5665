"""Short sentences of the window, made of results."""

from __future__ import annotations

from relorbit.desk.model import DeskModel
from relorbit.errors import InputError, RelorbitError
from relorbit.measures.pair import Pair
from relorbit.measures.vetting import is_corrected
from relorbit.show.numbers import angle, fixed, known

LETTERS = {"node": "\u03a9", "omega": "\u03c9"}
UNITS = {"P": "yr", "T": "yr", "e": "", "a": "\u2033", "i": "\u00b0", "node": "\u00b0",
         "omega": "\u00b0"}  # fmt: skip


def measure_in_words(model: DeskModel, row: int) -> str:
    """Epoch, observer, theta, rho and O-C in sigma of one measure."""
    m = model.pair.measures
    who = str(m.observer[row]) or "observer unknown"
    lines = [f"{fixed(m.epoch[row], 3)}  {who}, {m.technique[row]}", position_in_words(
        m.theta_effective[row], m.rho[row])]  # fmt: skip
    following = model.consequences
    if following is not None:
        of = following.residuals
        theta, rho = of.theta_in_sigma[row], of.rho_in_sigma[row]
        lines.append(f"O\u2212C  \u03b8 {in_sigma(theta)}   \u03c1 {in_sigma(rho)}")
    state = state_of(model.pair, row)
    if state:
        reason = str(m.reason[row])
        lines.append(f"{state}: {reason}" if reason else state)
    return "\n".join(lines)


def position_in_words(theta: float, rho: float, theta_places: int = 1, places: int = 3) -> str:
    """Position angle and separation; a dash where missing."""
    said = [f"\u03b8 {angle(theta, theta_places)}\u00b0" if known(theta) else "\u03b8 \u2013"]
    said.append(f"\u03c1 {fixed(rho, places)}\u2033" if known(rho) else "\u03c1 \u2013")
    return "   ".join(said)


def in_sigma(value: float) -> str:
    """A residual in standard deviations: +1.3 sigma."""
    return f"{fixed(value, 1, sign=True)} \u03c3" if known(value) else "\u2013"


def state_of(pair: Pair, row: int) -> str:
    """What was done to a measure: "set aside", "flipped", "corrected", several or nothing."""
    m = pair.measures
    words = ["set aside"] * (not m.use[row]) + ["flipped"] * bool(m.flip[row])
    words += ["corrected"] * is_corrected(m, row)
    return ", ".join(words)


def pair_in_words(pair: Pair) -> str:
    """How many measures, how many in use, from when to when."""
    m = pair.measures
    if not len(m):
        return "no measures yet"
    used = int(m.use.sum())
    count = f"{len(m)} measure{'s' * (len(m) != 1)}"
    aside = f", {len(m) - used} set aside" if used < len(m) else ""
    return f"{count}{aside}, {fixed(m.epoch.min(), 1)} to {fixed(m.epoch.max(), 1)}"


def chi2_in_words(chi2: float, sign: bool = False) -> str:
    """chi2 with a decimal, without one where it is large."""
    return fixed(chi2, 1 if chi2 < 1e4 else 0, sign=sign)


def sentence(words: str) -> str:
    """Words with a capital and a full stop."""
    return words[:1].upper() + words[1:] + ("" if words.endswith((".", ":", "?")) else ".")


def words_of(error: RelorbitError | ValueError) -> str:
    """What went wrong, in the words it was raised with, beginning with a capital."""
    words = str(error)
    if isinstance(error, InputError) and error.path is not None:
        return words
    return words[:1].upper() + words[1:]
