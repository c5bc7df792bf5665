"""A measure from two catalogue positions: theta and rho on the sphere, with their errors."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

from relorbit.errors import InputError
from relorbit.measures.dates import julian_years
from relorbit.measures.pair import declination, in_our_unit, right_ascension
from relorbit.measures.reduction import J2000, MAS, north_and_east, place_and_meridian_turn
from relorbit.measures.table import Measures

SCHEMA = "relorbit/between/1"
ARCSEC = 1000.0 * float(MAS)
SAME_DAY = 0.5 / 365.25  # years: epochs nearer than this are one
WIDE = 600.0  # arcsec: beyond it the places are hardly those of one pair
SAME_PLACE = 1e-15  # radians: below it a separation is rounding
AT_THE_POLE = 1e-9  # cos(dec) below which north has no direction
BARELY = 3.0  # separations below so many sigma give no angle worth the name


@dataclass(frozen=True)
class Place:
    """A star's catalogue position (ICRS, or mean equinox and axes of J2000).

    Attributes
    ----------
    ra_deg, dec_deg : float
        Degrees; also sexagesimal text (right ascension in hours) or Quantity.
    epoch : float or None
        Of the position, Julian year; also a date as text, or astropy Time.
    ra_err_mas, dec_err_mas : float or None
        Standard deviations on the sky (that in right ascension times cos(dec)), mas.
    correlation : float
        Of both; 0 where the catalogue tells none.
    pm_ra_mas_yr, pm_dec_mas_yr : float or None
        Proper motion, mas a year; that in right ascension times cos(dec).
    pm_ra_err_mas_yr, pm_dec_err_mas_yr, pm_correlation
        As for the position. Position and proper motion are taken as independent of each other,
        which they are at a catalogue's mean epoch.
    name : str

    Raises
    ------
    InputError
        For a value that cannot be.
    """

    ra_deg: float
    dec_deg: float
    epoch: float | None = None
    ra_err_mas: float | None = None
    dec_err_mas: float | None = None
    correlation: float = 0.0
    pm_ra_mas_yr: float | None = None
    pm_dec_mas_yr: float | None = None
    pm_ra_err_mas_yr: float | None = None
    pm_dec_err_mas_yr: float | None = None
    pm_correlation: float = 0.0
    name: str = ""

    def __post_init__(self) -> None:
        for field in fields(self):
            value = getattr(self, field.name)
            if field.name == "name":
                value = " ".join(str(value or "").split())
            elif value is None and field.default == 0.0:
                value = 0.0
            elif value is not None:
                value = _number(field.name, value)
            object.__setattr__(self, field.name, value)
        self._check()

    def _check(self) -> None:
        if self.ra_deg is None or self.dec_deg is None:
            raise InputError("a place needs ra and dec")
        if not (0 <= self.ra_deg < 360 and -90 <= self.dec_deg <= 90):
            raise InputError(
                f"position {self.ra_deg:.10g}, {self.dec_deg:.10g} is not on the sky; give right "
                "ascension in [0, 360) and declination in -90 to 90, degrees"
            )
        for name in ("ra_err_mas", "dec_err_mas", "pm_ra_err_mas_yr", "pm_dec_err_mas_yr"):
            value = getattr(self, name)
            if value is not None and not value > 0.0:
                raise InputError(f"{name}: {value:g} is not a standard deviation; give one above 0 "
                                 "or leave it out")  # fmt: skip
        for name in ("correlation", "pm_correlation"):
            if not -1.0 < getattr(self, name) < 1.0:
                raise InputError(f"{name}: {getattr(self, name):g} is not between -1 and 1")
        for one, other in (
            ("ra_err_mas", "dec_err_mas"), ("pm_ra_mas_yr", "pm_dec_mas_yr"),
            ("pm_ra_err_mas_yr", "pm_dec_err_mas_yr"),
        ):  # fmt: skip
            if (getattr(self, one) is None) != (getattr(self, other) is None):
                raise InputError(f"only one of {one} and {other} is given; give both or none")

    @property
    def moves(self) -> bool:
        """True where the proper motion is known."""
        return self.pm_ra_mas_yr is not None

    @property
    def unit(self) -> NDArray[np.float64]:
        """Unit vector to the position, shape (3,)."""
        alpha, delta = np.radians(self.ra_deg), np.radians(self.dec_deg)
        return np.array(
            [np.cos(delta) * np.cos(alpha), np.cos(delta) * np.sin(alpha), np.sin(delta)]
        )

    def to_dict(self) -> dict[str, Any]:
        return {field.name: getattr(self, field.name) for field in fields(self)}


@dataclass(frozen=True)
class PlaceMeasure:
    """What two catalogue positions make of a pair.

    Attributes
    ----------
    a, b : Place
        Theta is that of b about a.
    epoch : float
        Julian year.
    theta, rho : float
        Degrees in [0, 360) from the north of J2000 at the place of `a` at the epoch; arcsec.
    theta_err, rho_err : float or None
        Standard deviations, degrees and arcsec; None where a position brings no error.
    correlation : float or None
        Of the errors of theta and rho.
    meridian_turn : float
        What the way of `a` to its place of J2000 adds to theta in a list, degrees: see
        `relorbit.measures.reduction`. 0 where its proper motion is not known.
    notes : tuple of str
    """

    a: Place
    b: Place
    epoch: float
    theta: float
    rho: float
    theta_err: float | None
    rho_err: float | None
    correlation: float | None
    meridian_turn: float
    notes: tuple[str, ...] = ()

    def measures(self, observer: str = "", note: str = "") -> Measures:
        """The measure as a list of one row, technique "space", counted as all others there."""
        turned = (self.theta + self.meridian_turn) % 360.0 % 360.0
        return Measures.from_columns({
            "epoch": [self.epoch], "theta": [turned], "rho": [self.rho],
            "theta_err": [self.theta_err], "rho_err": [self.rho_err], "technique": ["space"],
            "observer": [observer], "note": [note], "equinox": ["J2000"],
            "theta_obs": [self.theta if turned != self.theta else None],
        })  # fmt: skip

    def to_dict(self) -> dict[str, Any]:
        """The JSON of ``relorbit between --json``, schema relorbit/between/1."""
        plain = {field.name: getattr(self, field.name) for field in fields(self)}
        return {"schema": SCHEMA, **plain, "a": self.a.to_dict(), "b": self.b.to_dict(),
                "notes": list(self.notes)}  # fmt: skip


def between(
    a: Place | Mapping[str, Any], b: Place | Mapping[str, Any], epoch: Any = None
) -> PlaceMeasure:
    """The measure that two catalogue positions amount to.

    Parameters
    ----------
    a, b : Place, or mapping of its attributes
        Primary and secondary.
    epoch : float, text or astropy Time, optional
        The wanted epoch, Julian year; by default that of the positions.

    Returns
    -------
    PlaceMeasure

    Raises
    ------
    InputError
        For a value that cannot be; for two stars at one place or on opposite sides of the sky;
        where the epochs differ and none is asked for; for another epoch than a position's own
        where its proper motion is not known.

    Notes
    -----
    The stars move straight in space, across the line of sight; motion along it and change of
    parallax are left out, as in the reduction to J2000. Errors are carried to first order, by the
    derivatives of spherical triangles; those of `a` and `b` are taken as independent.
    """
    a, b = (one if isinstance(one, Place) else _place(one) for one in (a, b))
    when = _epoch(a, b, epoch)
    (p, place_a), (q, place_b) = (_moved(one, who, when) for one, who in ((a, "A"), (b, "B")))
    if np.hypot(p[0], p[1]) < AT_THE_POLE:
        raise InputError("A stands at the pole, where north has no direction")
    north, east = _axes(p)
    gap = q - p
    rho = float(np.arctan2(np.linalg.norm(np.cross(p, gap)), p @ q))
    if not SAME_PLACE < rho < np.pi - 1e-9:
        where = "at the same place" if rho < 1.0 else "on opposite sides of the sky"
        raise InputError(f"A and B stand {where} at {when:.3f}: there is no angle between them")
    bearing = float(np.arctan2(gap @ east, gap @ north))
    theta_err = rho_err = correlation = None
    if place_a is not None and place_b is not None:
        covariance = _covariance(p, q, bearing, rho, place_a, place_b)
        sigma = np.sqrt(np.diag(covariance))
        # an angle known worse than half a turn is not known at all
        theta_err, rho_err = min(float(np.degrees(sigma[0])), 180.0), float(sigma[1]) / ARCSEC
        correlation = float(covariance[0, 1] / (sigma[0] * sigma[1]))
    theta = float(np.degrees(bearing) % 360.0 % 360.0)
    notes = _notes(a, b, when, rho / ARCSEC, theta_err, rho_err)
    return PlaceMeasure(
        a, b, when, theta, rho / ARCSEC, theta_err, rho_err, correlation,
        _meridian_turn(a, when), notes,
    )  # fmt: skip


def apart(a: Place, b: Place, epoch: float) -> float:
    """Arcsec between two places at an epoch (Julian year), 0 to 180 degrees."""
    (p, _), (q, _) = _moved(a, "A", epoch), _moved(b, "B", epoch)
    return float(np.arctan2(np.linalg.norm(np.cross(p, q)), p @ q)) / ARCSEC


def _place(given: Mapping[str, Any]) -> Place:
    known = [field.name for field in fields(Place)]
    short = {"ra": "ra_deg", "dec": "dec_deg"}
    values = {short.get(name, name): value for name, value in given.items()}
    unknown = sorted(set(values) - set(known))
    if unknown:
        raise InputError(f"a place has no {unknown[0]}; it has {', '.join(known)}")
    return Place(**{"ra_deg": None, "dec_deg": None, **values})


def _number(name: str, value: Any) -> float:
    if isinstance(value, str) and name == "ra_deg":
        value = right_ascension(value)
    elif isinstance(value, str) and name == "dec_deg":
        value = declination(value)
    elif isinstance(value, str) and name == "epoch":
        value = julian_years([value], "auto", lambda _, what: InputError(f"epoch: {what}"))[0]
    try:
        number = float(in_our_unit(name, value))
    except (TypeError, ValueError) as error:
        if isinstance(error, InputError):
            raise
        raise InputError(f"{name}: {value!r} is not a number") from None
    if not np.isfinite(number):
        raise InputError(f"{name}: {number} is not a finite number; leave it out where unknown")
    return number


def _epoch(a: Place, b: Place, epoch: Any) -> float:
    for one, who in ((a, "A"), (b, "B")):
        if one.epoch is None:
            raise InputError(f"{who} has no epoch; say of what year its position is, as epoch")
    if epoch is not None:
        return _number("epoch", epoch)
    if abs(a.epoch - b.epoch) > SAME_DAY:
        raise InputError(
            f"the position of A is of {a.epoch:.3f}, that of B of {b.epoch:.3f}; say for which "
            "epoch the measure is wanted"
        )
    return 0.5 * (a.epoch + b.epoch)


def _moved(
    one: Place, who: str, when: float
) -> tuple[NDArray[np.float64], NDArray[np.float64] | None]:
    """Unit vector at the epoch, shape (3,), and its covariance, (3, 3), radians; None unknown."""
    years = when - one.epoch
    if abs(years) <= SAME_DAY:
        years = 0.0
    if years and not one.moves:
        raise InputError(
            f"{who} has no proper motion, so its place at {when:.3f} is not known; give pm_ra and "
            f"pm_dec, or ask for {one.epoch:.3f}, the epoch of its position"
        )
    north, east = _axes(one.unit)
    basis = np.stack([east, north], axis=1)
    place = one.unit
    if years:
        place = place + MAS * years * (basis @ [one.pm_ra_mas_yr, one.pm_dec_mas_yr])
    size = np.linalg.norm(place)
    if one.ra_err_mas is None:
        return place / size, None
    spread = _square(one.ra_err_mas, one.dec_err_mas, one.correlation)
    if years and one.pm_ra_err_mas_yr is not None:
        spread = spread + years**2 * _square(
            one.pm_ra_err_mas_yr, one.pm_dec_err_mas_yr, one.pm_correlation
        )
    return place / size, basis @ spread @ basis.T / size**2


def _square(first: float, second: float, correlation: float) -> NDArray[np.float64]:
    """Covariance of two values in radians, from their errors in mas."""
    shared = correlation * first * second
    return MAS**2 * np.array([[first**2, shared], [shared, second**2]])


def _axes(place: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    north, east = north_and_east(place[np.newaxis])
    return north[0], east[0]


def _covariance(
    p: NDArray[np.float64],
    q: NDArray[np.float64],
    bearing: float,
    rho: float,
    of_p: NDArray[np.float64],
    of_q: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Of the bearing of q from p and their distance, shape (2, 2), radians."""
    north, east = _axes(p)
    along = np.cos(bearing) * north + np.sin(bearing) * east
    across = np.cos(bearing) * east - np.sin(bearing) * north
    # at q the direction away from p goes on along the same great circle
    onward = np.cos(rho) * along - np.sin(rho) * p
    # a step of p to the east also turns north
    turn = east * p[2] / np.hypot(p[0], p[1])
    by_q = np.stack([across / np.sin(rho), onward])
    by_p = np.stack([turn - across / np.tan(rho), -along])
    return by_p @ of_p @ by_p.T + by_q @ of_q @ by_q.T


def _meridian_turn(a: Place, when: float) -> float:
    if not a.moves:
        return 0.0
    north, east = _axes(a.unit)
    velocity = MAS * (a.pm_ra_mas_yr * east + a.pm_dec_mas_yr * north)
    then = a.unit + (J2000 - a.epoch) * velocity
    size = np.linalg.norm(then)
    then, velocity = then / size, velocity / size
    north, east = _axes(then)
    _, turn = place_and_meridian_turn(
        np.array([when]), float(np.degrees(np.arctan2(then[1], then[0]))),
        float(np.degrees(np.arctan2(then[2], np.hypot(then[0], then[1])))),
        float(velocity @ east) / MAS, float(velocity @ north) / MAS,
    )  # fmt: skip
    return float(np.degrees(turn[0]))


def _notes(
    a: Place, b: Place, when: float, rho: float, theta_err: float | None, rho_err: float | None
) -> tuple[str, ...]:
    notes = []
    for one, who in ((a, "A"), (b, "B")):
        if one.ra_err_mas is None:
            notes.append(f"the position of {who} brings no errors, so the measure has none")
        moved = abs(when - one.epoch) > SAME_DAY
        if moved and one.ra_err_mas is not None and one.pm_ra_err_mas_yr is None:
            notes.append(f"the proper motion of {who} brings no errors: those of the measure are "
                         "lower limits")  # fmt: skip
    if rho > WIDE:
        notes.append(f"A and B lie {rho:.0f} arcsec apart: are they the two stars of one pair?")
    if rho_err is not None and rho < BARELY * rho_err:
        notes.append("A and B are hardly apart, for the errors of their positions: the errors of "
                     "the measure, to first order, are too small")  # fmt: skip
    return tuple(notes)
