"""Position angles brought to equinox J2000: precession, and the turn of the meridian."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from relorbit.errors import InputError
from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures

MAS = np.deg2rad(1.0) / 3.6e6
J2000 = 2000.0


def reduce_to_j2000(
    measures: Measures,
    ra_deg: float,
    dec_deg: float,
    pm_ra_mas_yr: float | None = None,
    pm_dec_mas_yr: float | None = None,
) -> Measures:
    """The measures with every position angle counted from the north of J2000.

    Rows at J2000 are left alone, so that reducing twice is the same as once. A row of date turns
    by precession from the equinox of its epoch to J2000, and by the change of the direction of
    north along the star's way from its place at the epoch to that of J2000. A row at the equinox
    of a named year turns by precession from that year only: a list that was brought to one
    equinox is taken to have had the meridian's turn, if any, treated by its author. Unknown proper
    motion counts as none. The angle as received goes to `theta_obs`, the epoch to `epoch_obs`,
    unless something is there already. A row without position angle changes only its label.

    Parameters
    ----------
    measures : Measures
        The measures, n rows.
    ra_deg, dec_deg : float
        Position of the star at J2000 (epoch and equinox), degrees.
    pm_ra_mas_yr, pm_dec_mas_yr : float, optional
        Proper motion, milliarcseconds a year; that in right ascension times cos(dec).

    Returns
    -------
    Measures
        All rows at equinox "J2000".

    Raises
    ------
    InputError
        When the position is outside the sky, or is missing while a row needs it.

    Notes
    -----
    Precession is that of IAU 2006 (Capitaine, Wallace & Chapront 2003, A&A 412, 567) as in the
    IAU's SOFA library. The star moves in space on a straight line across the line of sight; motion
    along the line of sight and change of parallax are left out (below 0.001 deg a century for all
    but a handful of stars). The separation does not depend on the equinox.
    """
    to_turn = measures.equinox != "J2000"
    if not to_turn.any():
        return measures
    turned = to_turn & measures.has_theta
    theta = measures.theta.copy()
    theta_obs = measures.theta_obs.copy()
    if turned.any():
        _check_place(ra_deg, dec_deg)
        epoch, equinox = measures.epoch[turned], measures.equinox[turned]
        of_date = equinox == "date"
        years = np.array([
            when if word == "date" else _year(word)
            for when, word in zip(epoch, equinox, strict=True)
        ])  # fmt: skip
        motion = (pm_ra_mas_yr or 0.0, pm_dec_mas_yr or 0.0)
        place, turn = place_and_meridian_turn(epoch, ra_deg, dec_deg, *motion)
        turn = np.where(of_date, turn, 0.0) + pole_angle(place, years)
        fresh = turned & np.isnan(theta_obs)
        theta_obs[fresh] = theta[fresh]
        theta[turned] = np.mod(theta[turned] + np.rad2deg(turn), 360.0)
        theta[theta == 360.0] = 0.0  # mod of a tiny negative number rounds up to 360
    received = np.array([
        old if old or not changed else repr(float(when))
        for old, changed, when in zip(measures.epoch_obs, turned, measures.epoch, strict=True)
    ], dtype=str)  # fmt: skip
    label = np.full(len(measures), "J2000")
    return replace(
        measures, theta=theta, theta_obs=theta_obs, epoch_obs=received, equinox=label
    )


def reduce_pair(pair: Pair) -> tuple[Pair, int]:
    """The pair with theta at equinox J2000 where its position is known, and how many changed."""
    if pair.ra_deg is None or pair.dec_deg is None:
        return pair, 0
    motion = pair.pm_ra_mas_yr, pair.pm_dec_mas_yr
    measures = reduce_to_j2000(pair.measures, pair.ra_deg, pair.dec_deg, *motion)
    changed = (pair.measures.equinox != "J2000") & pair.measures.has_theta
    return pair.with_measures(measures), int(np.count_nonzero(changed))


def precession_of_date(pair: Pair, epoch: NDArray[np.float64]) -> NDArray[np.float64]:
    """Degrees that a reduction to J2000 adds to position angles of date, shape (n,).

    The pair must have a position; `epoch` is in Julian years, shape (n,).
    """
    one = Measures.from_columns(
        {"epoch": epoch, "theta": np.full(len(epoch), 180.0), "equinox": ["date"] * len(epoch)},
        allow_any_epoch=True,
    )
    return reduce_pair(pair.with_measures(one))[0].measures.theta - 180.0


def pole_angle(place: NDArray[np.float64], years: NDArray[np.float64]) -> NDArray[np.float64]:
    """Position angle of the mean pole of a year, seen from a star, from the north of J2000.

    It is what precession adds to a position angle of that equinox.

    Parameters
    ----------
    place : array, shape (n, 3)
        Unit vectors to the star in the axes of J2000.
    years : array, shape (n,)
        Julian years (TT).

    Returns
    -------
    array, shape (n,)
        Radians in (-pi, pi].
    """
    import erfa

    _, precession, _ = erfa.bp06(2451545.0, (years - J2000) * 365.25)
    pole = precession[:, 2, :]
    north, east = north_and_east(place)
    return np.arctan2(np.sum(pole * east, axis=1), np.sum(pole * north, axis=1))


def place_and_meridian_turn(
    epoch: NDArray[np.float64],
    ra_deg: float,
    dec_deg: float,
    pm_ra_mas_yr: float,
    pm_dec_mas_yr: float,
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Where the star was, (n, 3), and what its way to J2000 adds to a position angle, (n,) radians.

    A direction kept fixed along the great circle between the two places keeps its angle to that
    circle, so it turns against north as the circle does.
    """
    alpha, delta = np.deg2rad(ra_deg), np.deg2rad(dec_deg)
    now = np.array([[np.cos(delta) * np.cos(alpha), np.cos(delta) * np.sin(alpha), np.sin(delta)]])
    north, east = north_and_east(now)
    velocity = MAS * (pm_ra_mas_yr * east + pm_dec_mas_yr * north)
    then = now + velocity * (epoch - J2000)[:, np.newaxis]
    then = then / np.linalg.norm(then, axis=1, keepdims=True)
    if not velocity.any():
        return then, np.zeros(len(epoch))
    # The circle's direction is the same at both ends: its pole crossed with each place.
    circle = np.cross(now, velocity)
    north_then, east_then = north_and_east(then)
    along_then, along_now = np.cross(circle, then), np.cross(circle, now)
    bearing_then = np.arctan2(
        np.sum(along_then * east_then, axis=1), np.sum(along_then * north_then, axis=1)
    )
    bearing_now = np.arctan2(np.sum(along_now * east), np.sum(along_now * north))
    turn = bearing_now - bearing_then
    return then, np.arctan2(np.sin(turn), np.cos(turn))


def north_and_east(
    place: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Unit vectors (n, 3) to the north and the east of J2000 at unit vectors (n, 3)."""
    across = np.hypot(place[:, 0], place[:, 1])
    alpha = np.arctan2(place[:, 1], place[:, 0])
    sine, cosine, zero = np.sin(alpha), np.cos(alpha), np.zeros(len(place))
    north = np.stack([-place[:, 2] * cosine, -place[:, 2] * sine, across], axis=1)
    return north, np.stack([-sine, cosine, zero], axis=1)


def _check_place(ra_deg: float, dec_deg: float) -> None:
    if ra_deg is None or dec_deg is None:
        raise InputError(
            "position angles of date need the star's position; give right ascension and declination"
        )
    if not (0 <= ra_deg < 360 and -90 <= dec_deg <= 90):
        raise InputError(
            f"position {ra_deg}, {dec_deg} is not on the sky; give right ascension in [0, 360) and "
            "declination in -90 to 90, degrees"
        )


def _year(equinox: str) -> float:
    """Julian year of a named equinox; a Besselian one is Julian year 1900.000858 at 1900.

    Constants of Lieske 1979, A&A 73, 282, as in the IAU's SOFA library.
    """
    if equinox.startswith("B"):
        days = 15019.81352 + (float(equinox[1:]) - 1900.0) * 365.242198781
        return J2000 + (days - 51544.5) / 365.25
    return float(equinox.lstrip("J"))
