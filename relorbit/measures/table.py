"""The measures of one pair: columns, units, and the checks on every value."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, fields
from functools import partial
from os import PathLike

import numpy as np
from numpy.typing import ArrayLike, NDArray

from relorbit.errors import InputError

TECHNIQUES = ("eyepiece", "plate", "camera", "interferometer", "space", "unknown")
EARLIEST_EPOCH = 1600.0
LATEST_EPOCH = 2200.0

NUMBERS = (
    "epoch", "theta", "rho", "theta_err", "rho_err", "weight", "aperture_m", "nights", "theta_obs",
    "rho_obs",
)  # fmt: skip
FLAGS = {"use": True, "flip": False}
TEXTS = {
    "technique": "unknown", "observer": "", "reason": "", "note": "", "equinox": "J2000",
    "epoch_obs": "", "vetted": "",
}  # fmt: skip

EQUINOX = re.compile(r"date|[BJ]?[0-9]{4}(\.[0-9]*)?")
_CONTROL = re.compile(r"[\x00-\x1f\x7f-\x9f]")
_TRUE = {True, "true", "yes", "y", "1", "1.0"}
_FALSE = {False, "false", "no", "n", "0", "0.0"}


@dataclass(frozen=True)
class Measures:
    """The measures of one pair, as read-only arrays of one length n.

    Build it with `from_columns`, which fills what is not given and checks every value.

    Attributes
    ----------
    epoch : array, shape (n,)
        Julian epoch, TT, years.
    theta : array, shape (n,)
        Position angle, degrees in [0, 360) from north through east; NaN where missing.
    rho : array, shape (n,)
        Separation, arcseconds; NaN where missing.
    theta_err, rho_err : array, shape (n,)
        One standard deviation, degrees and arcseconds; NaN where unknown.
    weight : array, shape (n,)
        Relative weight, zero or more; NaN where unknown.
    technique : array of str, shape (n,)
        One of `TECHNIQUES`.
    observer : array of str, shape (n,)
        Who measured; may be empty.
    aperture_m : array, shape (n,)
        Aperture of the telescope, metres; NaN where unknown.
    nights : array, shape (n,)
        Number of nights in the mean; NaN where unknown.
    use : array of bool, shape (n,)
        False for a measure set aside; `reason` says why.
    flip : array of bool, shape (n,)
        True where the two stars were taken one for the other: see `theta_effective`.
    reason, note : array of str, shape (n,)
        Why a measure is set aside or flipped; any remark.
    equinox : array of str, shape (n,)
        What theta is counted from: "J2000", "date", or the year of an equinox ("1950.0").
    theta_obs : array, shape (n,)
        Position angle as received, where theta was changed; else NaN.
    epoch_obs : array of str, shape (n,)
        Epoch as received, where it was converted; else empty.
    rho_obs : array, shape (n,)
        Separation as received, where rho was changed; else NaN.
    vetted : array of str, shape (n,)
        What vetting changed, kept to be undone; see `relorbit.measures.vetting`.
    """

    epoch: NDArray[np.float64]
    theta: NDArray[np.float64]
    rho: NDArray[np.float64]
    theta_err: NDArray[np.float64]
    rho_err: NDArray[np.float64]
    weight: NDArray[np.float64]
    technique: NDArray[np.str_]
    observer: NDArray[np.str_]
    aperture_m: NDArray[np.float64]
    nights: NDArray[np.float64]
    use: NDArray[np.bool_]
    flip: NDArray[np.bool_]
    reason: NDArray[np.str_]
    note: NDArray[np.str_]
    equinox: NDArray[np.str_]
    theta_obs: NDArray[np.float64]
    epoch_obs: NDArray[np.str_]
    rho_obs: NDArray[np.float64]
    vetted: NDArray[np.str_]

    def __post_init__(self) -> None:
        size = np.shape(self.epoch)
        for field in fields(self):
            kind = float if field.name in NUMBERS else bool if field.name in FLAGS else str
            array = getattr(self, field.name)
            if not _is_settled(array, kind):
                array = np.array(array, dtype=kind)
            if array.ndim != 1 or array.shape != size:
                raise ValueError(
                    f"column {field.name} has shape {array.shape}, epoch has {size}: "
                    "every column is one row of values of the same length"
                )
            array.setflags(write=False)
            object.__setattr__(self, field.name, array)

    @classmethod
    def from_columns(
        cls,
        columns: Mapping[str, ArrayLike | None],
        where: str | PathLike[str] | None = None,
        *,
        lines: Sequence[int] | None = None,
        headers: Mapping[str, str] | None = None,
        allow_any_epoch: bool = False,
    ) -> Measures:
        """Measures from whatever columns there are, every value checked.

        Parameters
        ----------
        columns : mapping of str to array, shape (n,)
            Any of the attributes of this class, in its units; "epoch" and one of "theta", "rho"
            are required. None, a masked value and NaN are missing values. In words, runs of
            white space become one space.
        where : path, optional
            The file they come from, for messages.
        lines : sequence of int, shape (n,), optional
            The line of each row in that file, for messages.
        headers : mapping of str to str, optional
            The heading each column has in that file, for messages.
        allow_any_epoch : bool
            Also take epochs before 1600 or after 2200.

        Raises
        ------
        InputError
            For the first row with a value that cannot be; names row or line and column.
        TypeError
            For a column that measures do not have.
        """
        place = _Place(where, lines, headers or {})
        given = {name: value for name, value in columns.items() if value is not None}
        unknown = sorted(set(given) - {field.name for field in fields(cls)})
        if unknown:
            known = ", ".join(field.name for field in fields(cls))
            raise TypeError(f"measures have no column {', '.join(unknown)}; they have {known}")
        if "epoch" not in given:
            raise InputError("no column for the epoch; name it epoch, date, JD or MJD", path=where)
        if not {"theta", "rho"} & set(given):
            raise InputError(
                "no column for the position angle (theta) nor the separation (rho); "
                "name at least one",
                path=where,
            )
        ready = _columns_of_one_length(given, place)
        _check(ready, place, allow_any_epoch)
        return cls(**ready)

    def __len__(self) -> int:
        return len(self.epoch)

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Measures):
            return NotImplemented
        return all(
            np.array_equal(mine, theirs, equal_nan=mine.dtype.kind == "f")
            for mine, theirs in zip(self._arrays(), other._arrays(), strict=True)
        )

    __hash__ = None  # type: ignore[assignment]

    @property
    def theta_effective(self) -> NDArray[np.float64]:
        """Position angle with `flip` applied, degrees in [0, 360), shape (n,)."""
        return np.where(self.flip, np.mod(self.theta + 180.0, 360.0), self.theta)

    @property
    def has_theta(self) -> NDArray[np.bool_]:
        """True where a position angle was measured, shape (n,)."""
        return ~np.isnan(self.theta)

    @property
    def has_rho(self) -> NDArray[np.bool_]:
        """True where a separation was measured, shape (n,)."""
        return ~np.isnan(self.rho)

    def select(self, mask: ArrayLike) -> Measures:
        """The rows where `mask` (bool or indices) says so, as new measures."""
        mask = np.asarray(mask)
        if mask.size == 0:
            mask = mask.astype(int)
        return Measures(*(array[mask] for array in self._arrays()))

    def append(self, other: Measures) -> Measures:
        """These rows followed by those of `other`."""
        pairs = zip(self._arrays(), other._arrays(), strict=True)
        return Measures(*(np.concatenate(pair) for pair in pairs))

    def _arrays(self) -> Iterator[NDArray]:
        return (getattr(self, field.name) for field in fields(self))


def _is_settled(values: object, kind: type) -> bool:
    """True for a column of other measures, which nobody can change: it need not be copied."""
    return (
        isinstance(values, np.ndarray)
        and values.base is None
        and not values.flags.writeable
        and values.dtype.kind == np.dtype(kind).kind
        and (kind is str or values.dtype == kind)
    )


@dataclass(frozen=True)
class _Place:
    """Where a table comes from, to say where a bad value stands."""

    where: str | PathLike[str] | None
    lines: Sequence[int] | None
    headers: Mapping[str, str]

    def error(self, index: int, column: str | None, what: str) -> InputError:
        line = None if self.lines is None else int(self.lines[index])
        column = None if column is None else self.headers.get(column, column)
        return InputError(what, path=self.where, line=line, row=index + 1, column=column)


def _columns_of_one_length(given: Mapping[str, ArrayLike], place: _Place) -> dict[str, NDArray]:
    values = {name: _as_list(name, value) for name, value in given.items()}
    count = len(values["epoch"])
    for name, column in values.items():
        if len(column) != count:
            raise InputError(
                f"{len(column)} values where the epoch has {count}; give every column one "
                "value for each measure",
                path=place.where,
                column=name,
            )
    ready: dict[str, NDArray] = {}
    for name in NUMBERS:
        ready[name] = _numbers(name, values.get(name), count, place)
    for name, default in FLAGS.items():
        ready[name] = _flags(name, values.get(name), default, count, place)
    for name, default in TEXTS.items():
        ready[name] = _texts(name, values.get(name), default, count, place)
    return ready


def _as_list(name: str, value: ArrayLike) -> list | NDArray:
    if isinstance(value, np.ma.MaskedArray):
        value = np.where(np.ma.getmaskarray(value), None, value.data.astype(object))
    if isinstance(value, str) or np.ndim(value) == 0:
        raise InputError(
            f"one value ({value}) where a list of values belongs; put it in brackets", column=name
        )
    if np.ndim(value) != 1:
        raise InputError(
            f"an array of {np.ndim(value)} dimensions where a list of values belongs; give "
            "one value for each measure",
            column=name,
        )
    return value if isinstance(value, np.ndarray) and value.dtype.kind in "fiub" else list(value)


def _numbers(name: str, values: list | NDArray | None, count: int, place: _Place) -> NDArray:
    if values is None:
        return np.full(count, np.nan)
    try:
        return np.array([np.nan if v is None or v is np.ma.masked else v for v in values], float)
    except (TypeError, ValueError):
        for index, value in enumerate(values):
            try:
                float(np.nan if value is None else value)
            except (TypeError, ValueError):
                what = f"{value!r} is not a number"
                raise place.error(index, name, what) from None
        raise


def _flags(
    name: str, values: list | NDArray | None, default: bool, count: int, place: _Place
) -> NDArray:
    ready = np.full(count, default)
    for index, value in enumerate([] if values is None else values):
        word = value.strip().lower() if isinstance(value, str) else value
        if word is None or word is np.ma.masked or (isinstance(word, str) and not word):
            continue
        if word not in _TRUE and word not in _FALSE:
            raise place.error(index, name, f"{value!r} is not yes or no; write True or False")
        ready[index] = word in _TRUE
    return ready


def _texts(
    name: str, values: list | NDArray | None, default: str, count: int, place: _Place
) -> NDArray:
    ready = [default] * count
    for index, value in enumerate([] if values is None else values):
        text = "" if value is None or value is np.ma.masked else " ".join(str(value).split())
        if _CONTROL.search(text):
            raise place.error(index, name, f"{text!r} holds a control character; take it out")
        ready[index] = text or default
    return np.array(ready, dtype=str)


def _plain(value: float) -> str:
    return format(float(value), ".10g")


def _check(c: Mapping[str, NDArray], place: _Place, allow_any_epoch: bool) -> None:
    """Raise InputError for the first row that breaks a rule."""
    found: list[tuple[int, str | None, str]] = []

    def rule(bad: NDArray, column: str | None, what: Callable[[str], str]) -> None:
        if bad.any():
            index = int(np.argmax(bad))
            value = "" if column is None else c[column][index]
            text = _plain(value) if isinstance(value, float) else str(value)
            found.append((index, column, what(text)))

    _rules_of_presence(c, rule)
    for name in NUMBERS:
        rule(np.isinf(c[name]), name, lambda v: f"{v} is not a finite number")
    for name in ("theta", "theta_obs"):
        rule((c[name] < 0) | (c[name] >= 360), name, partial("{} is outside [0, 360); give the "
             "position angle in degrees, from 0 up to but not including 360".format))  # fmt: skip
    for name in ("rho", "rho_obs"):
        rule(c[name] < 0, name, lambda v: f"{v} is negative; a separation is 0 or more")
    rule(c["weight"] < 0, "weight", lambda v: f"{v} is negative; a weight is 0 or more")
    for name in ("theta_err", "rho_err"):
        rule(c[name] <= 0, name, lambda v: f"{v} is not a standard deviation; give one above 0 "
             "or leave it out")  # fmt: skip
    for name in ("aperture_m", "nights"):
        rule(c[name] <= 0, name, lambda v: f"{v} is not above 0; leave it out where unknown")
    if not allow_any_epoch:
        rule((c["epoch"] < EARLIEST_EPOCH) | (c["epoch"] > LATEST_EPOCH), "epoch", partial(
             "{} is before 1600 or after 2200; correct it, or allow any epoch".format))  # fmt: skip
    rule(~np.isin(c["technique"], TECHNIQUES), "technique",
         lambda v: f"{v!r} is not a technique; use one of {', '.join(TECHNIQUES)}")  # fmt: skip
    good = {word: bool(EQUINOX.fullmatch(word)) for word in set(c["equinox"].tolist())}
    bad = np.array([not good[word] for word in c["equinox"].tolist()], dtype=bool)
    rule(
        bad,
        "equinox",
        not_an_equinox,
    )
    if found:
        raise place.error(*min(found, key=lambda one: one[0]))


def not_an_equinox(word: str) -> str:
    """What is said of a word that names no equinox."""
    return f"{word!r} is not an equinox; use J2000, date, or a year such as 1950.0"


def _rules_of_presence(c: Mapping[str, NDArray], rule: Callable) -> None:
    rule(np.isnan(c["epoch"]), None, lambda _: "no epoch; every measure needs one")
    rule(
        np.isnan(c["theta"]) & np.isnan(c["rho"]),
        None,
        lambda _: "neither theta nor rho; a measure needs at least one of them",
    )
