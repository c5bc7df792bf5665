"""A measure of two catalogue positions, in words."""

from __future__ import annotations

from typing import TYPE_CHECKING

from relorbit.show.numbers import angle, calendar_date, decimals_for, fixed, known, table

if TYPE_CHECKING:
    from relorbit.measures.between import PlaceMeasure

WITHOUT = (5, 6)  # decimals of theta (degrees) and rho (arcsec) where they have no error


def between_text(found: PlaceMeasure) -> str:
    """Epoch, theta and rho with errors, their correlation, and what is to be said of them."""
    names = " and ".join(one.name or who for one, who in ((found.a, "A"), (found.b, "B")))
    rows = []
    for value, sigma, without in (
        (found.theta, found.theta_err, WITHOUT[0]), (found.rho, found.rho_err, WITHOUT[1]),
    ):  # fmt: skip
        decimals = decimals_for(sigma) if known(sigma) else without
        rows += [(angle if value is found.theta else fixed)(value, decimals),
                 fixed(sigma, decimals)]  # fmt: skip
    share = fixed(found.correlation, 2, sign=True)
    shown = table(
        ["epoch", "date (TT)", "theta", "sigma", "rho", "sigma", "correlation"],
        [[f"{found.epoch:.3f}", calendar_date(found.epoch), *rows, share]],
        "rrrrrrr",
        ["Julian yr", "", "deg", "deg", "arcsec", "arcsec", ""],
    )
    lines = [f"{names}: position angle and separation at equinox J2000", "", shown]
    if found.notes:
        lines += ["", *found.notes]
    return "\n".join(lines)
