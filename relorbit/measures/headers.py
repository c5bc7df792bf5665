"""Header words: which column a heading means, in which unit, and what kind of epoch."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

Fail = Callable[[str, str], Exception]

_GREEK = {
    "\u03b8": "theta", "\u03d1": "theta", "\u03c1": "rho", "\u03f1": "rho", "\u03c3": "sigma",
    "\u03b4": "d", "\u0394": "d", "\u00b1": " err ", "+/-": " err ", "+-": " err ",
    "\u00b0": " deg ", "\u00ba": " deg ", "''": " arcsec ", '"': " arcsec ", "\u2033": " arcsec ",
    "\u00b5": "u", "\u03bc": "u",
}  # fmt: skip
_UNIT_WORDS = {
    word: unit
    for unit, words in {
        "deg": "deg degs degree degrees",
        "rad": "rad rads radian radians",
        "arcsec": "arcsec arcsecs arcsecond arcseconds asec as sec",
        "mas": "mas milliarcsec milliarcsecond milliarcseconds marcsec",
        "uas": "uas microarcsec microarcsecond microarcseconds",
        "arcmin": "arcmin arcminute arcminutes",
        "m": "m metre metres meter meters",
        "cm": "cm",
        "mm": "mm",
        "in": "in inch inches",
        "jd": "jd",
        "mjd": "mjd",
        "julian": "jyear julian jyr",
        "besselian": "byear besselian bessel byr",
        "yr": "yr year years",
        "ut": "ut utc tt",
    }.items()
    for word in words.split()
}
_DEGREES = {"deg": (1.0, 1.0), "rad": (180.0, math.pi), "arcmin": (1.0, 60.0)}
_ARCSECONDS = {
    "arcsec": (1.0, 1.0), "mas": (1.0, 1e3), "uas": (1.0, 1e6), "arcmin": (60.0, 1.0),
    "deg": (3600.0, 1.0), "rad": (648000.0, math.pi),
}  # fmt: skip
_EPOCH_UNITS = dict.fromkeys(("jd", "mjd", "julian", "besselian", "yr", "ut"), (1.0, 1.0))
# What a column may be given in: number * first / second is the value in our unit.
UNITS = {
    "epoch": _EPOCH_UNITS,
    "theta": _DEGREES, "theta_err": _DEGREES, "theta_obs": _DEGREES,
    "rho": _ARCSECONDS, "rho_err": _ARCSECONDS, "rho_obs": _ARCSECONDS,
    "aperture_m": {"m": (1.0, 1.0), "cm": (1.0, 100.0), "mm": (1.0, 1000.0), "in": (2.54, 100.0)},
}  # fmt: skip


def _each(words: str, column: str) -> dict[str, str]:
    return dict.fromkeys(words.split(), column)


_ERROR = tuple(
    _each(
        "e err error errors sigma sig unc uncertainty std stdev stddev sd rms pm delta plusminus "
        "stderr se",
        "",
    )
)
_MEASURED = {
    **_each("theta pa posangle positionangle angle posang pangle posa", "theta"),
    **_each("rho sep separation distance dist angsep angularseparation", "rho"),
}
_WORDS: dict[str, str] = {
    **_MEASURED,
    **{error + word: f"{of}_err" for word, of in _MEASURED.items() for error in (*_ERROR, "d")},
    **{word + error: f"{of}_err" for word, of in _MEASURED.items() for error in _ERROR},
    **_each("weight weights wt wgt w relweight relativeweight", "weight"),
    **_each("observer observers obs observedby author", "observer"),
    **_each("technique tech method meth", "technique"),
    **_each("aperture aper ap diameter telescopeaperture", "aperture_m"),
    **_each("nights night n nn nnights numberofnights nobs", "nights"),
    **_each("note notes remark remarks comment comments", "note"),
    **_each("equinox eq eqx", "equinox"),
    **_each("use used", "use"),
    **_each("flip flipped", "flip"),
    "reason": "reason",
    "thetaobs": "theta_obs",
    "epochobs": "epoch_obs",
    "rhoobs": "rho_obs",
    "vetted": "vetted",
    "month": "month",
    "day": "day",
}
# The kinds of epoch, the surest first: of several such columns the first in this order is read.
_EPOCHS = {
    "jd juliandate julianday hjd bjd": "jd",
    "mjd modifiedjuliandate modifiedjulianday": "mjd",
    "jyear julianyear julianepoch jepoch": "julian",
    "byear besselian besselianyear besselianepoch besselyear bepoch": "besselian",
    "epoch obsepoch observationepoch meanepoch": "auto",
    "date obsdate dateobs observationdate dateofobservation meandate": "auto",
    "year yr obsyear": "auto",
    "time t": "auto",
}
_EPOCH_RANK = {
    word: (rank, kind)
    for rank, (words, kind) in enumerate(_EPOCHS.items())
    for word in words.split()
}


@dataclass(frozen=True)
class Heading:
    """One column of a list.

    Attributes
    ----------
    name : str
        The heading as the list has it.
    index : int
        Which cell of a row it is, from 0.
    column : str
        The column of `Measures` it holds, "year", "month" or "day", or "" when it is not read.
    unit : str
        The unit it names, or "".
    kind : str
        For an epoch, one of `relorbit.measures.dates.KINDS`.
    rank : int
        For an epoch, its place among several such columns; the lowest is read.
    """

    name: str
    index: int
    column: str = ""
    unit: str = ""
    kind: str = ""
    rank: int = 0

    @property
    def scale(self) -> tuple[float, float]:
        """Number by number: value in our unit = cell * first / second."""
        return UNITS.get(self.column, {}).get(self.unit, (1.0, 1.0))

    @property
    def meaning(self) -> str:
        """What it was understood as, in words; empty when it is not read."""
        if self.column == "epoch":
            return f"epoch ({'year or date' if self.kind == 'auto' else self.kind})"
        return f"{self.column}, in {self.unit}" if self.column and self.unit else self.column


def understand(
    names: Sequence[str], fail: Fail, units: Sequence[str] | None = None
) -> tuple[Heading, ...]:
    """What each heading of a list means.

    Parameters
    ----------
    names : sequence of str
        The headings. Case and punctuation do not matter; a unit may follow, as in ``sep_mas``,
        ``rho [mas]``, ``PA (deg)``. A bare word for an error belongs to the column before it.
    fail : callable
        Given a heading and what is wrong with it, makes the exception to raise.
    units : sequence of str, optional
        The unit of each column, where the file says it elsewhere; "" for none.

    Returns
    -------
    tuple of Heading
        One for each name, in order.
    """
    found: list[Heading] = []
    before = ""
    for index, name in enumerate(names):
        heading = _one(name, index, before, units[index] if units else "", fail)
        before = heading.column if heading.column in ("theta", "rho") else before
        found.append(heading)
    found = _one_epoch(found)
    seen: dict[str, str] = {}
    for heading in found:
        if heading.column and heading.column in seen:
            other = seen[heading.column]
            raise fail(heading.name, f"means {heading.column}, as {other} does; keep one of them")
        seen[heading.column] = heading.name
    return tuple(found)


def unit_of(word: str) -> str | None:
    """The unit that a word means, or None."""
    words = _tokens(word)
    return _UNIT_WORDS.get(words[0]) if len(words) == 1 else None


def looks_like_header(names: Sequence[str]) -> bool:
    """True when the words name an epoch, and an angle or a separation."""
    try:
        columns = {heading.column for heading in understand(names, lambda _, what: KeyError(what))}
    except KeyError:
        return False
    return "epoch" in columns and bool({"theta", "rho"} & columns)


def means_note(name: str) -> bool:
    """True when the heading is that of remarks, which may be of several words."""
    return _WORDS.get("".join(_tokens(name))) == "note"


def _tokens(name: str) -> list[str]:
    text = name.lower()
    for symbol, word in _GREEK.items():
        text = text.replace(symbol, word)
    return re.findall(r"[a-z]+|[0-9]+", text)


def _one(name: str, index: int, before: str, said: str, fail: Fail) -> Heading:
    """A heading by its words; `before` is the measured column that stands before it."""
    bracket = re.fullmatch(r"(.*?)[\[(]([^\])]*)[\])]\s*", name)
    words = _tokens(bracket[1] if bracket and bracket[1].strip() else name)
    named = unit_of(bracket[2]) if bracket and bracket[1].strip() else None
    words = [w for i, w in enumerate(words) if w not in ("in", "of", "the") or i == len(words) - 1]
    candidates = [("".join(words), None)]
    if len(words) > 1 and words[-1] in _UNIT_WORDS:
        candidates.append(("".join(words[:-1]), _UNIT_WORDS[words[-1]]))
    for word, suffix in candidates:
        unit = said or named or suffix or ""
        if word in _EPOCH_RANK:
            return _epoch(name, index, word, unit)
        column = _WORDS.get(word, "")
        if not column and word in _ERROR and before:
            column = f"{before}_err"
        if column:
            break
    else:
        return Heading(name, index)
    if said and unit_of(said):
        unit = unit_of(said) or ""
    unknown = bracket is not None and bracket[1].strip() and bracket[2].strip() and named is None
    if column in UNITS and ((unit and unit not in UNITS[column]) or unknown):
        raise fail(name, f"unit {unit or bracket[2]!r} is not one of {_list(column)}")
    return Heading(name, index, column, unit if column in UNITS else "")


def _list(column: str) -> str:
    return ", ".join(UNITS[column])


def _epoch(name: str, index: int, word: str, unit: str) -> Heading:
    rank, kind = _EPOCH_RANK[word]
    if unit in ("jd", "mjd", "julian", "besselian"):
        kind = unit
        rank = list(_EPOCHS.values()).index(unit)
    # "year" is kept apart until it is known whether month and day stand beside it.
    return Heading(name, index, "year" if word == "year" else "epoch", "", kind, rank)


def _one_epoch(found: list[Heading]) -> list[Heading]:
    """Keep the surest of several epochs; make a date of year, month and day."""
    columns = [heading.column for heading in found]
    whole_date = {"year", "month", "day"} <= set(columns)
    if not whole_date:
        found = [
            replace(h, column={"year": "epoch", "month": "", "day": ""}.get(h.column, h.column))
            for h in found
        ]
    epochs = [h for h in found if h.column == "epoch"]
    if whole_date:
        return [replace(h, column="") if h.column == "epoch" else h for h in found]
    best = min((h.rank, h.index) for h in epochs) if epochs else None
    return [
        replace(h, column="") if h.column == "epoch" and (h.rank, h.index) != best else h
        for h in found
    ]

