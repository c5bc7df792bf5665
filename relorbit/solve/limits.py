"""What the measures say when they do not determine an orbit."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from relorbit.orbit.kepler import TWO_PI, FloatArray
from relorbit.orbit.straight import RectilinearElements, rectilinear_elements
from relorbit.solve.basins import orbits_at
from relorbit.solve.holding import Holding
from relorbit.solve.linear import sky_data, solve_scaled
from relorbit.solve.observations import Observations
from relorbit.solve.refine import Problem, Refined, covariance, polar_problem, refine, sky_problem
from relorbit.solve.search import search

PROFILE_POINTS = 48
PROFILE_STEPS = 25
VAGUE_PERIOD = 0.25  # error of ln P above which the valley of chi2 is too bent to be followed
SURE_PERIOD = 0.02  # error of ln P below which chi2 has risen too far long before the end
FOLLOW_STEP = 0.3  # in ln P, when an orbit is followed to longer periods
PROFILE_SHORTEST, PROFILE_LONGEST = 0.5, 300.0  # in units of the time span
ONE_SIGMA = 1.0  # rise of (scaled) chi2 up to which any long period does as well as the best
TWO_SIGMA = 4.0  # rise of (scaled) chi2 at a limit of two standard deviations


@dataclass(frozen=True)
class StraightMotion:
    """Uniform straight motion through the measures: z = z0 + v (t - epoch).

    Attributes
    ----------
    epoch : float, Julian year (weighted mean).
    theta, rho : float, degrees and arcsec at that epoch.
    theta_sigma, rho_sigma : float, formal errors.
    motion_north, motion_east : float, arcsec a year.
    motion_sigma : float, formal error of each component of the motion.
    chi2 : float, in theta and rho, as for an orbit.
    covariance : ndarray, shape (4, 4), formal, of (x, x motion, y, y motion).
    """

    epoch: float
    theta: float
    rho: float
    theta_sigma: float
    rho_sigma: float
    motion_north: float
    motion_east: float
    motion_sigma: float
    chi2: float
    covariance: FloatArray

    @property
    def place(self) -> complex:
        """x + i y at the epoch, arcsec."""
        return complex(self.rho * np.exp(1j * np.radians(self.theta)))

    @property
    def motion(self) -> complex:
        """x + i y, arcsec a year."""
        return complex(self.motion_north, self.motion_east)

    def known(self) -> dict[str, float]:
        """Place and motion, for programs."""
        names = ("epoch", "theta", "theta_sigma", "rho", "rho_sigma", "motion_north", "motion_east",
                 "motion_sigma")  # fmt: skip
        return {name: getattr(self, name) for name in names}

    def text(self) -> str:
        """Place and motion in words."""
        direction = float(np.degrees(np.angle(self.motion)) % 360.0)
        return (
            f"Known: at {self.epoch:.1f} theta {self.theta:.2f} +/- {self.theta_sigma:.2g} deg, "
            f"rho {self.rho:.3f} +/- {self.rho_sigma:.2g} arcsec, moving {abs(self.motion):.3g} "
            f"+/- {self.motion_sigma:.2g} arcsec/yr towards {direction:.0f} deg."
        )

    def rectilinear(self) -> RectilinearElements:
        """The closest point and its epoch; ValueError where nothing moves."""
        return rectilinear_elements(self.epoch, self.place, self.motion, self.covariance)


def straight_motion(observations: Observations) -> StraightMotion:
    """Least squares on theta and rho for uniform straight motion (four unknowns)."""
    o = observations
    t0 = o.mean_epoch
    time = o.epoch - t0
    data = sky_data(o)
    basis = np.stack([np.ones_like(time), time])
    # unknowns: x0, vx, y0, vy; first on x and y, then on theta and rho
    xx, xy, yy = (basis * w @ basis.T for w in (data.w_xx, data.w_xy, data.w_yy))
    normal = np.block([[xx, xy], [xy, yy]])
    x, y = data.z.real, data.z.imag
    right = np.concatenate(
        [basis @ (data.w_xx * x + data.w_xy * y), basis @ (data.w_xy * x + data.w_yy * y)]
    )
    p = solve_scaled(normal, right)
    chi2, normal, right = _line_equations(o, basis, p)
    for _ in range(30):
        step = solve_scaled(normal, right)
        trial = _line_equations(o, basis, p + step)
        while trial[0] > chi2 and np.abs(step).max() > 1e-12:
            step *= 0.5
            trial = _line_equations(o, basis, p + step)
        if trial[0] >= chi2:
            break
        done = chi2 - trial[0] < 1e-9
        p, (chi2, normal, right) = p + step, trial
        if done:
            break
    covariance = np.linalg.pinv(normal, hermitian=True)
    z = complex(p[0], p[2])
    place = covariance[np.ix_([0, 2], [0, 2])]
    along = np.array([z.real, z.imag]) / max(abs(z), 1e-12)
    across = np.array([-along[1], along[0]])
    return StraightMotion(
        t0, float(np.degrees(np.angle(z)) % 360.0), abs(z),
        float(np.degrees(np.sqrt(max(across @ place @ across, 0.0)) / max(abs(z), 1e-12))),
        float(np.sqrt(max(along @ place @ along, 0.0))),
        float(p[1]), float(p[3]), float(np.sqrt(0.5 * (covariance[1, 1] + covariance[3, 3]))), chi2,
        covariance,
    )  # fmt: skip


def _line_equations(
    o: Observations, basis: FloatArray, p: FloatArray
) -> tuple[float, FloatArray, FloatArray]:
    z = p[:2] @ basis + 1j * (p[2:] @ basis)
    rho = np.maximum(np.abs(z), 1e-12)
    unit = np.conj(z) / rho
    gap = o.theta - np.angle(z)
    gap -= TWO_PI * np.rint(gap / TWO_PI)
    r = np.concatenate([gap * o.per_theta, (o.rho - rho) * o.per_rho])
    along = np.concatenate([basis * unit.real, -basis * unit.imag]) * o.per_rho
    across = np.concatenate([basis * unit.imag, basis * unit.real]) * (o.per_theta / rho)
    J = np.concatenate([across, along], axis=1)
    return float(r @ r), J @ J.T, J @ r


@dataclass(frozen=True)
class PeriodProfile:
    """The least chi2 that any orbit of a given period reaches.

    Attributes
    ----------
    P : ndarray, shape (p,), Julian years, rising.
    chi2 : ndarray, shape (p,)
    """

    P: FloatArray
    chi2: FloatArray

    def lower_limit(self, best: float, scale: float) -> float:
        """The period (years) below which chi2 is over two standard deviations above `best`.

        `scale` is the reduced chi2 that a rise is measured in.
        """
        rise = (self.chi2 - best) / scale
        inside = np.flatnonzero(rise <= TWO_SIGMA)
        if not inside.size:
            return float(self.P[np.argmin(rise)])
        first = int(inside[0])
        if first == 0:
            return float(self.P[0])
        # where the profile crosses the limit, in ln P
        # chi2 is nearly a parabola there, and its root a straight line
        high, low = np.sqrt(np.maximum(rise[first - 1 : first + 1], 0.0))
        share = (high - np.sqrt(TWO_SIGMA)) / max(high - low, 1e-300)
        log_P = np.log(self.P[first - 1 : first + 1])
        return float(np.exp(log_P[0] + share * (log_P[1] - log_P[0])))


def period_profile(observations: Observations) -> PeriodProfile:
    """Least chi2 against period, from half the time span to 300 times it, nothing held."""
    t0 = observations.mean_epoch
    data = sky_data(observations)
    periods = observations.span * np.geomspace(PROFILE_SHORTEST, PROFILE_LONGEST, PROFILE_POINTS)
    grid = search(data, periods)
    every = np.broadcast_to(grid.P[:, None], grid.T.shape)
    eccentricity = np.broadcast_to(grid.e, grid.T.shape)
    u = orbits_at(data, t0, every.ravel(), eccentricity.ravel(), grid.T.ravel())
    for problem in (sky_problem(data, t0), polar_problem(observations, t0)):
        settled = refine(problem, u, None, PROFILE_STEPS, 1e-2, columns=slice(1, 7))
        u = settled.u
    return PeriodProfile(periods, settled.chi2.reshape(grid.T.shape).min(axis=1))


def rise_at_long_periods(
    observations: Observations, t0: float, orbits: Refined, scale: float, held: Holding
) -> float:
    """By how much (scaled) chi2 rises towards the longest periods; infinity beyond two sigma.

    Where the period of the best orbit is vague the whole profile is computed. Else every orbit
    in `orbits` that fits within two standard deviations of the best is followed to longer
    periods, the other unknowns refitted at each step, until chi2 has risen too far or the end of
    the profile is reached. Held elements, P not among them, keep their values.
    """
    problem = polar_problem(observations, t0)
    best = float(orbits.chi2[0])
    limit = best + TWO_SIGMA * scale
    vague = scale * covariance(problem, orbits.u[0], held)[0, 0] > VAGUE_PERIOD**2
    if vague and not held.values:
        end = period_profile(observations).chi2[-3:].min()
    else:
        near = orbits.u[orbits.chi2 < limit]
        end = min(
            np.inf
            if scale * covariance(problem, u, held)[0, 0] < SURE_PERIOD**2
            else _chi2_at_the_end(problem, u, limit, observations.span, held)
            for u in near
        )
    return float(max(end - best, 0.0) / scale) if end < limit else np.inf


def _chi2_at_the_end(
    problem: Problem, u: FloatArray, limit: float, span: float, held: Holding
) -> float:
    end = np.log(PROFILE_LONGEST * span)
    chi2 = np.inf
    while u[0] < end:
        # along the valley: the other unknowns follow ln P by the normal equations
        _, J = problem.with_jacobian(u[None])
        normal = J[0] @ J[0].T
        slope = -solve_scaled(normal[1:, 1:], normal[1:, 0])
        u = u + FOLLOW_STEP * np.concatenate([[1.0], slope])
        e = np.hypot(u[1], u[2])
        if e >= 0.999:
            u[1:3] *= 0.999 / e
        if held.values:
            now = Holding({**held.values, "P": float(np.exp(u[0]))})
            settled = refine(problem, u, now, 2 * PROFILE_STEPS, 1e-2)
        else:
            settled = refine(problem, u, None, 2 * PROFILE_STEPS, 1e-2, columns=slice(1, 7))
        u, chi2 = settled.u[0], float(settled.chi2[0])
        if chi2 > limit:
            return np.inf
    return chi2
