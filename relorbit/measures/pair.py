"""A pair: who it is, its measures, and the orbits on record."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field, fields, replace
from os import PathLike
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from relorbit.errors import InputError
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements

_UNITS = {
    "theta": "deg", "rho": "arcsec", "theta_err": "deg", "rho_err": "arcsec", "theta_obs": "deg",
    "rho_obs": "arcsec", "aperture_m": "m", "ra_deg": "deg", "dec_deg": "deg",
    "pm_ra_mas_yr": "mas/yr", "pm_dec_mas_yr": "mas/yr", "parallax_mas": "mas",
    "parallax_err_mas": "mas", "magnitude_primary": "mag", "magnitude_secondary": "mag",
    "ra_err_mas": "mas", "dec_err_mas": "mas", "pm_ra_err_mas_yr": "mas/yr",
    "pm_dec_err_mas_yr": "mas/yr",
}  # fmt: skip
_ALIASES = {
    "ra": "ra_deg", "dec": "dec_deg", "parallax": "parallax_mas",
    "parallax_err": "parallax_err_mas", "pm_ra": "pm_ra_mas_yr", "pm_dec": "pm_dec_mas_yr",
    "aperture": "aperture_m",
}  # fmt: skip
_SEXAGESIMAL = re.compile(
    r"(?P<sign>[+-]?)(?P<first>[0-9]{1,3})(?:[hd°:\s]\s*)(?P<second>[0-9]{1,2})"
    r"(?:[m'\u2032:\s]\s*(?P<third>[0-9]{1,2}(?:\.[0-9]*)?)?)?[s\"\u2033]?"
)
_DECIMAL = re.compile(r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)")


@dataclass(frozen=True)
class RecordedOrbit:
    """An orbit kept with its pair.

    Attributes
    ----------
    name : str
        What the observer calls it; one orbit of a name for each pair.
    elements : Elements
        The seven Campbell elements.
    sigma : dict or None
        One standard deviation of each element, by the element's name; None where unknown.
    reference_epoch : float or None
        The epoch `covariance` belongs to, Julian year.
    covariance : array, shape (7, 7), or None
        Covariance in the coordinates of the fit, kept as it was given.
    chi2 : float or None
        Sum of the squared standardised residuals of the fit.
    dof : int or None
        Degrees of freedom of the fit.
    recorded : str
        The day it was recorded, ISO date.
    source, note : str
        Where it comes from; any remark.
    """

    name: str
    elements: Elements
    sigma: dict[str, float | None] | None = None
    reference_epoch: float | None = None
    covariance: np.ndarray | None = field(default=None, compare=False)
    chi2: float | None = None
    dof: int | None = None
    recorded: str = ""
    source: str = ""
    note: str = ""

    def __post_init__(self) -> None:
        if self.covariance is not None:
            matrix = np.array(self.covariance, dtype=float)
            if matrix.shape != (7, 7):
                raise InputError(f"the covariance has shape {matrix.shape}; it must be (7, 7)")
            matrix.setflags(write=False)
            object.__setattr__(self, "covariance", matrix)

    def to_dict(self) -> dict[str, Any]:
        """Plain numbers, words, lists and None, fit for JSON and for `from_dict`."""
        matrix = None if self.covariance is None else self.covariance.tolist()
        sigma = self.sigma and {name: _number_or_none(v) for name, v in self.sigma.items()}
        elements = {name: float(value) for name, value in self.elements.to_dict().items()}
        return {
            "name": self.name,
            "elements": elements,
            "sigma": sigma,
            "reference_epoch": _number_or_none(self.reference_epoch),
            "covariance": matrix,
            "chi2": _number_or_none(self.chi2),
            "dof": None if self.dof is None else int(self.dof),
            "recorded": self.recorded,
            "source": self.source,
            "note": self.note,
        }

    @classmethod
    def from_dict(cls, record: Mapping[str, Any]) -> RecordedOrbit:
        """The orbit that `to_dict` wrote.

        Raises
        ------
        InputError
            When something is missing, is not a number, or is not part of an orbit.
        """
        given = dict(record)
        try:
            name = str(given.pop("name"))
            elements = {key: float(value) for key, value in given.pop("elements").items()}
            return cls(name, Elements(**elements), **given)
        except KeyError as error:
            raise InputError(f"a recorded orbit has no {error}") from None
        except (TypeError, ValueError, AttributeError) as error:
            raise InputError(f"a recorded orbit cannot be read: {error}") from None


@dataclass(frozen=True)
class Pair:
    """A double star: who it is, what was measured, and the orbits on record.

    Attributes
    ----------
    name : str
        The name used in texts and figures.
    measures : Measures
        The measures.
    designations : tuple of str
        Other names.
    ra_deg, dec_deg : float or None
        Position at J2000 (epoch and equinox), degrees.
    pm_ra_mas_yr, pm_dec_mas_yr : float or None
        Proper motion in milliarcseconds a year; that in right ascension times cos(dec).
    parallax_mas, parallax_err_mas : float or None
        Parallax and its standard deviation, milliarcseconds.
    magnitude_primary, magnitude_secondary : float or None
        Visual magnitudes.
    spectral_primary, spectral_secondary : str or None
        Spectral types.
    orbits : tuple of RecordedOrbit
        The orbits on record, in the order recorded.
    note : str
        Any remark.

    Raises
    ------
    InputError
        For a value that cannot be.
    """

    name: str
    measures: Measures
    designations: tuple[str, ...] = ()
    ra_deg: float | None = None
    dec_deg: float | None = None
    pm_ra_mas_yr: float | None = None
    pm_dec_mas_yr: float | None = None
    parallax_mas: float | None = None
    parallax_err_mas: float | None = None
    magnitude_primary: float | None = None
    magnitude_secondary: float | None = None
    spectral_primary: str | None = None
    spectral_secondary: str | None = None
    orbits: tuple[RecordedOrbit, ...] = ()
    note: str = ""

    def __post_init__(self) -> None:
        if isinstance(self.designations, str):
            raise InputError("designations is one word; give a list of names")
        object.__setattr__(self, "designations", tuple(self.designations))
        object.__setattr__(self, "orbits", tuple(self.orbits))
        for name in _UNITS:
            if hasattr(self, name):
                object.__setattr__(self, name, _identity_number(name, getattr(self, name)))
        if self.ra_deg is not None and not 0 <= self.ra_deg < 360:
            raise InputError(f"right ascension {self.ra_deg:.10g} is outside [0, 360) degrees")
        if self.dec_deg is not None and not -90 <= self.dec_deg <= 90:
            raise InputError(f"declination {self.dec_deg:.10g} is outside -90 to 90 degrees")
        if self.parallax_err_mas is not None and self.parallax_err_mas <= 0:
            raise InputError(
                f"parallax error {self.parallax_err_mas:.10g} is not above 0; leave it out "
                "where unknown"
            )

    @classmethod
    def from_arrays(
        cls,
        epoch: ArrayLike,
        theta: ArrayLike | None,
        rho: ArrayLike | None,
        theta_err: ArrayLike | None = None,
        rho_err: ArrayLike | None = None,
        *,
        allow_any_epoch: bool = False,
        **who: Any,
    ) -> Pair:
        """A pair from plain arrays or astropy quantities, position angles at equinox J2000.

        Parameters
        ----------
        epoch : array, shape (n,), or astropy Time
            Julian years, TT.
        theta, theta_err : array, shape (n,), or Quantity
            Position angle in [0, 360) and its standard deviation, degrees. NaN where missing;
            None for all.
        rho, rho_err : array, shape (n,), or Quantity
            Separation and its standard deviation, arcseconds. NaN where missing; None for all.
        allow_any_epoch : bool
            Also take epochs before 1600 or after 2200.
        **who
            Any attribute of `Pair` but `measures`, and any other column of `Measures`, of which
            a single word or number counts for every row. ``ra`` and ``dec`` may be given instead
            of ``ra_deg`` and ``dec_deg``, as degrees, sexagesimal text (right ascension in hours)
            or Quantity; ``parallax``, ``parallax_err``, ``pm_ra``, ``pm_dec``, ``aperture`` stand
            for the names with units.

        Raises
        ------
        InputError
            For a bad value, naming row and column; it is a ValueError too.
        TypeError
            For a keyword that neither a pair nor measures have.
        """
        columns = {"epoch": epoch, "theta": theta, "rho": rho, "theta_err": theta_err}
        columns |= {"rho_err": rho_err}
        identity: dict[str, Any] = {"name": "unnamed pair"}
        of_pair = {f.name for f in fields(cls)} - {"measures"}
        of_measures = {f.name for f in fields(Measures)}
        for keyword, value in who.items():
            name = _ALIASES.get(keyword, keyword)
            if name in of_pair:
                target = identity
            elif name in of_measures:
                target = columns
            else:
                known = sorted((of_pair | of_measures | set(_ALIASES)) - set(columns))
                raise TypeError(f"from_arrays has no {keyword!r}; it takes {', '.join(known)}")
            if name in target and name != "name":
                raise TypeError(f"from_arrays got {name} twice, once as {keyword}")
            target[name] = value
        columns = {name: in_our_unit(name, value) for name, value in columns.items()}
        count = np.size(columns["epoch"])
        for name in set(columns) - {"epoch", "theta", "rho", "theta_err", "rho_err"}:
            if columns[name] is not None and np.ndim(columns[name]) == 0:
                columns[name] = [columns[name]] * count
        measures = Measures.from_columns(columns, allow_any_epoch=allow_any_epoch)
        return cls(measures=measures, **identity)

    def write(self, path: str | PathLike[str]) -> None:
        """Write the pair file `path`; see `relorbit.measures.store.write_pair`."""
        from relorbit.measures.store import write_pair

        write_pair(self, path)

    def with_measures(self, measures: Measures) -> Pair:
        """This pair with other measures."""
        return replace(self, measures=measures)

    def with_identity(self, **said: Any) -> Pair:
        """This pair with other identity fields.

        Position as degrees or sexagesimal text, numbers as numbers or text. New `designations`
        are added to those there are. Raises InputError for a value that cannot be.
        """
        if "designations" in said:
            added = [name for name in said["designations"] if name not in self.designations]
            said["designations"] = (*self.designations, *added)
        return replace(self, **said)

    def with_orbit(self, recorded: RecordedOrbit) -> Pair:
        """This pair with one more orbit on record, in place of one of the same name."""
        others = tuple(orbit for orbit in self.orbits if orbit.name != recorded.name)
        return replace(self, orbits=(*others, recorded))

    def orbit(self, name: str | None = None) -> RecordedOrbit:
        """The orbit on record of that name, by default the one recorded last.

        Raises
        ------
        InputError
            When there is none; lists those there are.
        """
        chosen = [orbit for orbit in self.orbits if name is None or orbit.name == name]
        if chosen:
            return chosen[-1]
        if not self.orbits:
            raise InputError(f"{self.name} has no orbit on record; record one first")
        known = ", ".join(orbit.name for orbit in self.orbits)
        raise InputError(f"{self.name} has no orbit {name!r} on record; it has {known}")

    def identity(self) -> dict[str, Any]:
        """Who the pair is: every attribute but the measures and orbits, as plain values."""
        who = {f.name: getattr(self, f.name) for f in fields(self)}
        del who["measures"], who["orbits"]
        return {**who, "designations": list(self.designations)}

    def to_dict(self) -> dict[str, Any]:
        """Everything as plain numbers, words, lists and None, fit for JSON."""
        columns = {}
        for column in fields(Measures):
            values = getattr(self.measures, column.name).tolist()
            columns[column.name] = [_number_or_none(v) for v in values]
        orbits = [orbit.to_dict() for orbit in self.orbits]
        return {**self.identity(), "measures": columns, "orbits": orbits}


def new_pair(name: str) -> Pair:
    """A pair without measures."""
    return Pair(name, Measures.from_columns({"epoch": [], "theta": [], "rho": []}))


def right_ascension(text: str | float) -> float:
    """Degrees from a right ascension: decimal degrees, or hours such as ``15 23 12.3``.

    Raises
    ------
    InputError
        When it is neither, or outside [0, 360) degrees.
    """
    return _angle(text, "right ascension", 15.0, 24, "in decimal degrees or as 15 23 12.3")


def declination(text: str | float) -> float:
    """Degrees from a declination: decimal degrees, or sexagesimal such as ``+30 17 16``.

    Raises
    ------
    InputError
        When it is neither, or outside -90 to 90 degrees.
    """
    return _angle(text, "declination", 1.0, 91, "in decimal degrees or as +30 17 16")


def _angle(text: str | float, what: str, factor: float, limit: int, right: str) -> float:
    if not isinstance(text, str):
        return float(text)
    word = text.strip().replace("\u2212", "-")
    if _DECIMAL.fullmatch(word):
        return float(word)
    match = _SEXAGESIMAL.fullmatch(word)
    if match is None or (factor == 15.0 and ("d" in word or match["sign"])):
        raise InputError(f"{text!r} is not a {what}; write it {right}")
    first, second = int(match["first"]), int(match["second"])
    third = float(match["third"] or 0.0)
    if first >= limit or second >= 60 or third >= 60:
        raise InputError(f"{text!r} is not a {what}; write it {right}")
    size = factor * (first + second / 60 + third / 3600)
    return -size if match["sign"] == "-" else size


def _identity_number(name: str, value: Any) -> float | None:
    """A plain float or None from what an identity field was given."""
    if value is None:
        return None
    if isinstance(value, str) and name in ("ra_deg", "dec_deg"):
        return right_ascension(value) if name == "ra_deg" else declination(value)
    try:
        number = float(in_our_unit(name, value))
    except (TypeError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError(f"{name}: {value!r} is not a number") from None
    if not math.isfinite(number):
        raise InputError(f"{name}: {number} is not a finite number; leave it out where unknown")
    return number


def in_our_unit(name: str, value: Any) -> Any:
    """Plain values in this project's units from an astropy Time, Quantity, Column or array."""
    if name == "epoch" and hasattr(value, "jyear") and hasattr(value, "tt"):
        return np.asarray(value.tt.jyear)
    if getattr(value, "unit", None) is None:
        return value
    quantity = value.quantity if hasattr(value, "quantity") else value
    try:
        return np.asarray(quantity.to_value(_UNITS.get(name, "yr" if name == "epoch" else "")))
    except Exception as error:  # astropy's UnitConversionError, without importing astropy
        raise InputError(f"{name}: {error}") from None


def _number_or_none(value: Any) -> Any:
    """The value as a plain one; None for a number that is missing."""
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value.item() if isinstance(value, np.generic) else value
