"""Results as plain text tables, in ASCII so that every terminal and file can hold them.

Every function returns a string without a line end; only the command line prints.
"""

from __future__ import annotations

import textwrap
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np

from relorbit.orbit.elements import NAMES, Elements
from relorbit.show.noise_text import noise_table
from relorbit.show.numbers import (
    angle,
    dates_of,
    decimals_for,
    error_text,
    fixed,
    known,
    rough_date,
    significant,
    table,
    with_error,
)

if TYPE_CHECKING:
    from relorbit.derive.ephemeris import Ephemeris, TurningPoint
    from relorbit.derive.mass import MassBudget
    from relorbit.orbit.third_law import TotalMass
    from relorbit.solve.residuals import Residuals
    from relorbit.solve.solution import Notice, Solution

WIDTH = 80
UNITS = {
    "P": "yr", "T": "Julian yr", "e": "", "a": "arcsec", "i": "deg", "node": "deg",
    "omega": "deg",
}  # fmt: skip
MEANING = {
    "P": "period", "T": "periastron", "e": "eccentricity", "a": "semimajor axis",
    "i": "inclination", "node": "node", "omega": "arg. periastron",
}  # fmt: skip
TURNING = {
    "periastron": "periastron", "closest": "closest on the sky", "widest": "widest on the sky",
}  # fmt: skip
# Decimals where no error decides them; None: five significant figures
DECIMALS = {"P": None, "T": 3, "e": 4, "a": None, "i": 2, "node": 2, "omega": 2}
THETA_DECIMALS, RHO_DECIMALS = 2, 4
UNKNOWN_ANGLE = 180.0  # degrees: an ephemeris error capped here says nothing of the angle


NOT_DETERMINED = "not determined"


def solution_text(solution: Solution) -> str:
    """The whole of a solution: fit, elements, mass, alternatives, techniques, warnings."""
    parts = [
        fit_text(solution),
        elements_table(solution),
        mass_text(solution),
        alternatives_table(solution),
        noise_table(solution.noise) or technique_table(solution.residuals),
        warnings_text(solution.warnings),
    ]
    return "\n\n".join(part for part in parts if part)


def fit_text(solution: Solution) -> str:
    """What was fitted and how well."""
    epochs = solution.residuals.epoch[solution.residuals.used]
    lines = [f"{solution.pair}: {solution.used} of {solution.measures} measures used"]
    if epochs.size:
        turns = np.ptp(epochs) / solution.elements.P
        lines[0] += f", {epochs.min():.1f} to {epochs.max():.1f}"
        lines.append(f"covering {turns:.2f} of a revolution" if turns < 1.0
                     else f"covering {turns:.1f} revolutions")  # fmt: skip
    if solution.dof > 0:
        lines.append(
            f"chi2 {fixed(solution.chi2, 1)} for {solution.dof} degrees of freedom "
            f"(reduced {significant(solution.reduced_chi2, 3)})"
        )
    else:
        lines.append(f"chi2 {fixed(solution.chi2, 1)}, no degrees of freedom")
    return "\n".join(lines)


def element_rows(
    elements: Elements,
    sigma: Mapping[str, float | None] | None = None,
    held: Mapping[str, float] | None = None,
) -> list[tuple[str, str, str, str]]:
    """Name, value, sigma and remark of each element, as text.

    The value ends where two figures of its sigma end; a held value is given whole.
    """
    rows = []
    for name in NAMES:
        value = getattr(elements, name)
        error = None if sigma is None else sigma.get(name)
        remark = "" if sigma is None else _why_no_error(name, elements, error)
        if held and name in held:
            rows.append((name, f"{value:.10g}", "", "held"))
            continue
        text, spread = _element_value(name, value, error), ""
        if remark == NOT_DETERMINED:
            text = significant(value, 2) if name in ("P", "e", "a") else fixed(value, 1)
        if known(error):
            spread = error_text(error)
        rows.append((name, text, spread, remark))
    return rows


def elements_table(
    orbit: Solution | Elements, sigma: Mapping[str, float | None] | None = None
) -> str:
    """The elements with their errors.

    Parameters
    ----------
    orbit : Solution or Elements
        Of a solution both errors are given where they differ: sigma (scaled) and formal.
    sigma : mapping, optional
        One standard deviation of each element, when only elements are given.
    """
    if isinstance(orbit, Elements):
        rows = element_rows(orbit, sigma)
        return _elements(rows, ["value", *(["sigma"] if sigma else [])], None)
    rows = element_rows(orbit.elements, orbit.sigma, orbit.held)
    if orbit.error_scale <= 1.0:
        return _elements(rows, ["value", "sigma"], None) + (
            "\nsigma: one standard deviation, from the errors "
            + ("that the residuals show" if orbit.noise else "of the measures")
        )
    formal = {name: error_text(s) if known(s) else "" for name, s in orbit.sigma_formal.items()}
    note = (
        f"sigma: one standard deviation, scaled: the formal error times "
        f"{significant(orbit.error_scale, 3)}, the root of reduced chi2\n"
        "formal: from the errors of the measures alone"
    )
    return _elements(rows, ["value", "sigma", "formal"], formal) + "\n" + _wrapped(note)


def _elements(
    rows: Sequence[tuple[str, str, str, str]], heads: list[str], formal: Mapping[str, str] | None
) -> str:
    lines = []
    for name, value, sigma, remark in rows:
        numbers = [value, sigma, formal[name] if formal else ""][: len(heads)]
        lines.append([name, MEANING[name], UNITS[name], *numbers, remark])
    align = "lll" + "." * len(heads) + "l"
    return table(["", "element", "unit", *heads, ""], lines, align)


def _element_value(name: str, value: float, sigma: float | None) -> str:
    if known(sigma) and sigma > 0.0:
        decimals = decimals_for(sigma)
    elif DECIMALS[name] is None:
        return significant(value, 5)
    else:
        decimals = DECIMALS[name]
    return angle(value, decimals) if name in ("node", "omega") else fixed(value, decimals)


def _why_no_error(name: str, elements: Elements, sigma: float | None) -> str:
    """Why an element has no error, or no meaning."""
    if known(sigma):
        return ""
    if elements.e == 0.0 and name in ("T", "omega"):
        return "undefined: circular"
    if elements.i in (0.0, 180.0) and name in ("i", "node", "omega"):
        return "as node: face-on" if name == "omega" else "undefined: face-on"
    return NOT_DETERMINED


def mass_text(solution: Solution) -> str:
    """The total mass, and a^3/P^2, which the mass depends on."""
    value, sigma = solution.axis_cubed_over_period_squared
    ratio, spread = _pair_of_figures(value, sigma)
    lines = [f"a^3/P^2     {ratio}{spread} arcsec^3/yr^2"]
    mass = solution.mass_total
    if mass is None:
        lines.append("total mass  not known: the pair has no parallax")
        return "\n".join(lines)
    lines.append(f"total mass  {mass_figures(mass)} solar masses{_parallax(solution)}")
    return "\n".join(lines)


def mass_figures(mass: TotalMass) -> str:
    """The mass and its error in one word, such as ``2.41 +/- 0.12``."""
    return "".join(_pair_of_figures(mass.value, mass.sigma))


def _parallax(solution: Solution) -> str:
    if not known(solution.parallax_mas):
        return ""
    value, sigma = with_error(solution.parallax_mas, solution.parallax_err_mas, 2)
    spread = f" +/- {sigma}" if known(solution.parallax_err_mas) else ""
    return f" (parallax {value}{spread} mas)"


def _pair_of_figures(value: float, sigma: float | None) -> tuple[str, str]:
    """A number and " +/- error"; small numbers with an exponent."""
    if not known(sigma) or sigma <= 0.0:
        return f"{value:.4g}", ""
    if 1e-3 <= abs(value) < 1e6:
        text, error = with_error(value, sigma, 4)
        return text, f" +/- {error}"
    power = int(f"{value:.0e}".split("e")[1])
    text, error = with_error(value / 10.0**power, sigma / 10.0**power, 4)
    return f"({text}", f" +/- {error})e{power}"


def mass_budget_text(budget: MassBudget) -> str:
    """The total mass and where its error comes from."""
    mass = budget.mass
    ratio, spread = _pair_of_figures(*budget.axis_cubed_over_period_squared)
    lines = [
        f"total mass           {mass_figures(mass)} solar masses",
        f"a^3/P^2              {ratio}{spread} arcsec^3/yr^2",
        f"true semimajor axis  {significant(budget.semimajor_axis_au, 4)} au",
    ]
    if budget.correlation is not None:
        lines.append(f"correlation of a, P  {fixed(budget.correlation, 3, sign=True)}")
    rows = [[one.name, one.sigma, one.share] for one in budget.sources]
    if not rows:
        return "\n".join([*lines, "error of the mass unknown: neither orbit nor parallax has one"])
    if known(mass.sigma):
        rows.append(["together", mass.sigma, sum(one.share for one in budget.sources)])
    cells = [
        [name, _signed_error(sigma), _signed_error(100.0 * sigma / mass.value),
         fixed(100.0 * share, 0)]
        for name, sigma, share in rows
    ]  # fmt: skip
    heads = ["source of error", "sigma", "of the mass", "of the variance"]
    units = ["", "solar masses", "%", "%"]
    parts = ["\n".join(lines), table(heads, cells, "l...", units)]
    if any(one.sigma < 0.0 for one in budget.sources):
        parts.append(_wrapped("Below 0: the correlation takes that much away, since errors of a "
                              "and of P cancel in a^3/P^2."))  # fmt: skip
    return "\n\n".join(parts)


def component_text(masses: tuple[float, float], mass_ratio: float) -> str:
    """The mass of each star, from the total mass and the mass ratio given."""
    primary, secondary = (significant(mass, 3) for mass in masses)
    return (
        f"mass ratio {mass_ratio:g} as given: primary {primary}, secondary {secondary} "
        "solar masses"
    )


def _signed_error(sigma: float) -> str:
    return ("-" if sigma < 0.0 else "") + error_text(abs(sigma))


def alternatives_table(solution: Solution) -> str:
    """Other orbits that fit, beside the one adopted; an empty string where there is none."""
    if not solution.alternatives:
        return ""
    listed = [("adopted", solution.elements, solution.chi2)]
    listed += [("", one.elements, one.chi2) for one in solution.alternatives]
    rows = []
    for word, orbit, chi2 in listed:
        P, e, T, a = (significant(orbit.P, 4), fixed(orbit.e, 3), fixed(orbit.T, 2),
                      significant(orbit.a, 4))  # fmt: skip
        rows.append([P, e, T, a, fixed(orbit.i, 1), fixed(chi2, 1),
                     fixed(chi2 - solution.chi2, 1, sign=True), word])  # fmt: skip
    return "alternatives: each of these orbits is a minimum of chi2 too\n" + table(
        ["P", "e", "T", "a", "i", "chi2", "delta chi2", ""], rows, ".......l",
        ["yr", "", "Julian yr", "arcsec", "deg", "", "", ""],
    )  # fmt: skip


def technique_table(residuals: Residuals) -> str:
    """Residuals summed up for each technique in use; an empty string where nothing is used."""
    summaries = residuals.by_technique()
    if not summaries:
        return ""
    sizes = [x for s in summaries for x in (s.rms_across, s.rms_along) if known(x)]
    unit, factor = ("mas", 1000.0) if sizes and max(sizes) < 0.1 else ("arcsec", 1.0)
    rows = [
        [
            s.technique,
            str(s.measures),
            str(s.numbers),
            *(significant(x * factor, 3) if known(x) else "-" for x in (s.rms_across, s.rms_along)),
            fixed(s.chi2, 1),
            fixed(s.chi2 / s.numbers, 2) if s.numbers else "-",
        ]
        for s in summaries
    ]
    return table(
        ["technique", "measures", "values", "rms across", "rms along", "chi2", "chi2/values"],
        rows, "lrr....", ["", "", "", unit, unit, "", ""],
    )  # fmt: skip


def residuals_table(residuals: Residuals) -> str:
    """O-C of every measure, in the order of the pair's measures.

    Each row has the figures that its own errors justify. x marks a row that was not used.
    """
    r = residuals
    rows = []
    for k in range(len(r)):
        theta_places = _places(r.theta_err[k], THETA_DECIMALS)
        rho_places = _places(r.rho_err[k], RHO_DECIMALS)
        across = _places(r.rho_computed[k] * np.radians(r.theta_err[k]), RHO_DECIMALS)
        rows.append(
            [
                "" if r.used[k] else "x",
                fixed(r.epoch[k], 3),
                angle(r.theta[k], theta_places),
                fixed(r.rho[k], rho_places),
                fixed(r.d_theta[k], theta_places, sign=True),
                fixed(r.d_rho[k], rho_places, sign=True),
                fixed(r.arc[k], across, sign=True),
                fixed(r.theta_in_sigma[k], 1, sign=True),
                fixed(r.rho_in_sigma[k], 1, sign=True),
                str(r.technique[k]),
                str(r.observer[k]),
            ]
        )
    heads = ["", "", "", "", "O-C", "O-C", "O-C", "O-C", "O-C", "", ""]
    units = ["", "epoch", "theta", "rho", "theta", "rho", "across", "th/s", "rho/s",
             "technique", "observer"]  # fmt: skip
    note = (
        "theta in degrees, rho and across (theta as arc) in arcsec; th/s and rho/s: O-C over "
        "the error of the measure"
    )
    if not r.used.all():
        note += f"; x: not used ({int(np.count_nonzero(~r.used))})"
    return table(heads, rows, "l........ll", units, gap=" ") + "\n" + _wrapped(note)


def _places(sigma: float, without: int) -> int:
    return max(decimals_for(sigma), 0) if known(sigma) and sigma > 0.0 else without


def ephemeris_rows(ephemeris: Ephemeris) -> list[list[str]]:
    """Julian year, calendar date, theta, its sigma, rho, its sigma, as text, a row an epoch."""
    epochs = ephemeris.epoch.tolist()
    dates = dates_of(epochs)
    rows = []
    for epoch, date, row in zip(epochs, dates, ephemeris.rows(), strict=True):
        theta_sigma, rho_sigma = row["theta_sigma"], row["rho_sigma"]
        theta = angle(row["theta"], _places(theta_sigma, THETA_DECIMALS))
        rho, rho_error = with_error(row["rho"], rho_sigma, RHO_DECIMALS)
        theta_error = error_text(theta_sigma)
        if known(theta_sigma) and theta_sigma >= UNKNOWN_ANGLE:
            theta_error = "any"
        rows.append([fixed(epoch, 3), date, theta, theta_error, rho, rho_error])
    return rows


def ephemeris_table(ephemeris: Ephemeris) -> str:
    """Predicted positions with their errors, where the orbit brings errors."""
    rows = ephemeris_rows(ephemeris)
    heads = ["epoch", "date (TT)", "theta", "sigma", "rho", "sigma"]
    units = ["Julian yr", "", "deg", "deg", "arcsec", "arcsec"]
    keep = range(6)
    if not np.isfinite(ephemeris.rho_sigma).any():
        keep = (0, 1, 2, 4)
    return table(
        [heads[k] for k in keep],
        [[row[k] for k in keep] for row in rows],
        "".join(".l...."[k] for k in keep),
        [units[k] for k in keep],
    )


def turning_rows(points: Sequence[TurningPoint]) -> list[list[str]]:
    """What, Julian year, its sigma, date no finer than that, theta and rho, as text."""
    rows = []
    for point in points:
        epoch, sigma = with_error(point.epoch, point.epoch_sigma, 2)
        rows.append([TURNING[point.kind], epoch, sigma, rough_date(point.epoch, point.epoch_sigma),
                     angle(point.theta, 1), significant(point.rho, 3)])  # fmt: skip
    return rows


def turning_points_table(points: Sequence[TurningPoint]) -> str:
    """The next periastron, closest and widest apparent separation."""
    return table(
        ["next", "epoch", "sigma", "date", "theta", "rho"], turning_rows(points), "l..l..",
        ["", "Julian yr", "yr", "", "deg", "arcsec"],
    )  # fmt: skip


def warnings_text(warnings: Sequence[Notice]) -> str:
    """Each warning as a wrapped paragraph; an empty string where there is none."""
    return "\n".join(
        textwrap.fill(f"Note: {one.text}", WIDTH, subsequent_indent="      ") for one in warnings
    )


def _wrapped(text: str) -> str:
    return "\n".join(textwrap.fill(line, WIDTH) for line in text.split("\n"))
