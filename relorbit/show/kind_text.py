"""What kind of pair it is, in words."""

from __future__ import annotations

import math

from relorbit.orbit.straight import RectilinearElements
from relorbit.show.noise_text import noise_table
from relorbit.show.numbers import angle, decimals_for, error_text, fixed, significant, table
from relorbit.show.posterior_text import ERRORS, paragraph
from relorbit.show.text import warnings_text
from relorbit.solve.kind import APART, DECISIVE, Decider, EscapeTest, Kind

NAMES = {"rest": "at rest to each other", "straight": "straight motion", "orbit": "orbit"}


def kind_text(kind: Kind) -> str:
    """All that is to be said of the kind of a pair."""
    parts = [
        f"{kind.pair}: {verdict_text(kind)}",
        hypotheses_table(kind),
        paragraph(
            f"Equal odds before the measures; errors {ERRORS[kind.posterior.errors]}. Orbits: "
            + str(kind.posterior.prior) + "; periods "
            "{:.3g} to {:.3g} years, axes {:.3g} to {:.3g} arcsec; separations of the other two "
            "likewise; speeds of passing stars {:.2g} to {:.2g} arcsec a year, uniform in ln."
            .format(*kind.posterior.prior.period_range, *kind.posterior.prior.axis_range,
                    *kind.speed_range)
        ),
        rectilinear_text(kind.rectilinear),
        escape_text(kind.escape),
        decider_text(kind.decider),
        noise_table(kind.posterior.noise),
        warnings_text(kind.warnings),
    ]  # fmt: skip
    return "\n\n".join(part for part in parts if part)


def odds_text(odds: float) -> str:
    """Odds as a ratio to one."""
    if not math.isfinite(odds) or odds > 1e6:
        return "over a million to 1"
    if odds >= 1.0:
        return f"{significant(odds, 2)} to 1"
    return f"1 to {significant(1.0 / odds, 2)}" if odds > 1e-6 else "1 to over a million"


def verdict_text(kind: Kind) -> str:
    """The verdict in words, with the odds."""
    rest, moving, _ = kind.hypotheses
    odds = odds_text(kind.odds_orbit)
    if kind.verdict == "orbit":
        return f"orbit shown (odds {odds} for an orbit)"
    if kind.verdict == "optical":
        return f"optical: two stars passing{_why_optical(kind)} (odds {odds} for an orbit)"
    motion = "no relative motion shown" if rest.log_evidence > moving.log_evidence else (
        "curvature not shown yet: common motion")  # fmt: skip
    bound = ""
    if kind.escape is not None:
        least = significant(kind.escape.mass_needed, 2)
        bound = f", bound only if the total mass exceeds {least} suns"
    doubt = "" if kind.odds_orbit <= DECISIVE**0.5 else ", an orbit is likely"
    return f"{motion}{bound} (odds {odds} for an orbit{doubt})"


def _why_optical(kind: Kind) -> str:
    """What shows it where the odds alone do not."""
    if kind.odds_orbit < 1.0 / DECISIVE or kind.escape is None:
        return ""
    if (kind.escape.parallax_gap or 0.0) > APART:
        return " at different distances"
    return " too fast to be bound"


def hypotheses_table(kind: Kind) -> str:
    """Each kind with its marginal likelihood, BIC and probability."""
    best = max(one.log_evidence for one in kind.hypotheses)
    least = min(one.bic for one in kind.hypotheses)
    rows = [
        [NAMES[one.name], str(one.unknowns), fixed(one.chi2, 1), fixed(one.log_evidence - best, 1),
         fixed(one.bic - least, 1, sign=True), f"{100.0 * one.probability:.3g}"]
        for one in kind.hypotheses
    ]  # fmt: skip
    heads = ["", "unknowns", "chi2", "ln likelihood", "BIC", "per cent"]
    units = ["", "", "", "below the best", "above the least", ""]
    return table(heads, rows, "lr....", units)


def rectilinear_text(elements: RectilinearElements | None) -> str:
    """The rectilinear elements with their errors."""
    if elements is None:
        return ""
    labels = {
        "closest_rho": ("closest separation", "arcsec"), "closest_theta": ("at theta", "deg"),
        "closest_epoch": ("at epoch", "Julian yr"), "motion": ("motion", "arcsec/yr"),
        "direction": ("towards theta", "deg"),
    }  # fmt: skip
    rows = []
    for name, (label, unit) in labels.items():
        value, sigma = getattr(elements, name), elements.sigma[name]
        places = max(decimals_for(sigma), 0) if sigma else 4
        text = angle(value, places) if unit == "deg" else fixed(value, places)
        rows.append([label, unit, text, error_text(sigma)])
    return "as straight motion\n" + table(["", "unit", "value", "sigma"], rows, "ll..")


def escape_text(test: EscapeTest | None) -> str:
    """The test against the speed of escape; an empty string where there is no parallax."""
    if test is None:
        return ""
    text = (
        f"Projected distance {_with(test.distance_au, test.distance_au_sigma)} au, projected "
        f"relative speed {_with(test.speed_km_s, test.speed_km_s_sigma)} km/s (from "
        f"{test.source}): a total mass below {_with(test.mass_needed, test.mass_needed_sigma)} "
        "suns could not hold them. Both projections make a pair look more bound than it is."
    )
    if test.escape_km_s is not None:
        speed = _with(test.escape_km_s, test.escape_km_s_sigma)
        text += f" Speed of escape there with the mass given: {speed} km/s."
    if test.parallax_gap is not None:
        text += f" The parallaxes differ by {fixed(test.parallax_gap, 1)} of their error."
    return paragraph(text)


def _with(value: float, sigma: float | None) -> str:
    if not sigma or not math.isfinite(sigma):
        return significant(value, 3)
    places = max(decimals_for(sigma), 0)
    return f"{fixed(value, places)} +/- {error_text(sigma)}"


def decider_text(decider: Decider | None) -> str:
    """What further measure would decide; an empty string where the matter is decided."""
    if decider is None:
        return ""
    if decider.epoch is None:
        return paragraph("No single measure of the next hundred years would decide: orbits and "
                         "straight motion stay too close together.")  # fmt: skip
    return paragraph(
        f"A measure in {decider.epoch:.0f} with errors of {significant(decider.precision, 2)} "
        f"arcsec or less would decide: by then half of the orbits that fit are "
        f"{significant(decider.gap, 2)} arcsec or more off the straight line."
    )
