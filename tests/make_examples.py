"""Make the invented pairs of example_measures/, always the same ones.

    python tests/make_examples.py [FOLDER]

Nothing here was observed: elements are made up, measures are drawn from them with the errors
stated below, names of pairs and observers are invented.
"""

from __future__ import annotations

import sys
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from relorbit.measures.pair import Pair
from relorbit.measures.reduction import reduce_to_j2000
from relorbit.measures.store import write_text_atomically
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements, complex_position, polar

INVENTED = "Invented pair: made-up elements, generated measures, made-up observers."


@dataclass(frozen=True)
class Campaign:
    """Measures of one technique by some observers over some years."""

    technique: str
    observers: tuple[str, ...]
    first: float
    last: float
    count: int
    error: float  # arcsec, in x and y
    theta_digits: int
    rho_digits: int
    aperture_m: float
    nights: tuple[int, int] = (1, 4)
    states_errors: bool = True


def campaign(elements: Elements, plan: Campaign, rng: np.random.Generator) -> dict[str, np.ndarray]:
    """Columns of one campaign, rounded as such measures are printed."""
    n = plan.count
    epoch = np.sort(rng.uniform(plan.first, plan.last, n)).round(3)
    nights = rng.integers(*plan.nights, n, endpoint=True)
    error = plan.error / np.sqrt(nights)
    z = complex_position(elements, epoch) + error * (rng.normal(size=n) + 1j * rng.normal(size=n))
    theta, rho = polar(z)
    theta_err = np.degrees(np.arctan2(error, rho))
    stated = plan.states_errors
    return {
        "epoch": epoch,
        "theta": np.round(theta, plan.theta_digits) % 360.0,
        "rho": rho.round(plan.rho_digits),
        "theta_err": theta_err.round(plan.theta_digits + 1) if stated else np.full(n, np.nan),
        "rho_err": error.round(plan.rho_digits + 1) if stated else np.full(n, np.nan),
        "technique": np.full(n, plan.technique, dtype="U16"),
        "observer": rng.choice(plan.observers, n),
        "aperture_m": np.full(n, plan.aperture_m),
        "nights": nights.astype(float),
    }


def measures(elements: Elements, plans: list[Campaign], seed: int) -> Measures:
    """All campaigns in order of time."""
    rng = np.random.default_rng(seed)
    parts = [campaign(elements, plan, rng) for plan in plans]
    columns = {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}
    order = np.argsort(columns["epoch"], kind="stable")
    return Measures.from_columns({name: column[order] for name, column in columns.items()})


EARLY = ("I. Vornath", "P. Quennel")
MIDDLE = ("L. Ostramby", "Marlock Hill")
LATE = ("T. Seddevar", "N. Abruzel")
FRINGES = ("Cairnmoor array", "Sundholt 3 m")

TARN = Elements(62.4, 1978.31, 0.42, 1.85, 52.0, 71.0, 214.0)
TARN_WHO = {
    "ra_deg": 231.55, "dec_deg": 41.22, "pm_ra_mas_yr": 212.0, "pm_dec_mas_yr": -164.0,
    "parallax_mas": 95.0, "parallax_err_mas": 0.4, "magnitude_primary": 5.9,
    "magnitude_secondary": 7.1, "spectral_primary": "G1V", "spectral_secondary": "K0V",
}  # fmt: skip


def tarn_31() -> Pair:
    """A full orbit over 1.5 revolutions, three techniques."""
    plans = [
        Campaign("eyepiece", EARLY, 1931.0, 1972.0, 24, 0.09, 1, 2, 0.5, states_errors=False),
        Campaign("plate", MIDDLE, 1946.0, 1984.0, 14, 0.025, 2, 3, 0.66),
        Campaign("camera", LATE, 1996.0, 2024.5, 22, 0.02, 2, 3, 0.28),
    ]
    return Pair("Tarn 31", measures(TARN, plans, 31), **TARN_WHO, note=INVENTED)


def quill_8() -> Pair:
    """Very eccentric, its periastron poorly covered."""
    elements = Elements(148.0, 1957.9, 0.905, 1.32, 117.0, 22.0, 281.0)
    plans = [
        Campaign("eyepiece", EARLY, 1868.0, 1951.0, 34, 0.07, 1, 2, 0.4),
        Campaign("plate", MIDDLE, 1960.5, 1978.0, 9, 0.03, 2, 3, 0.66),
        Campaign("interferometer", FRINGES, 1981.0, 2024.0, 18, 0.004, 2, 4, 3.0),
    ]
    return Pair(
        "Quill 8", measures(elements, plans, 8), ra_deg=14.8, dec_deg=-12.6, parallax_mas=31.0,
        parallax_err_mas=0.5, magnitude_primary=7.2, magnitude_secondary=7.9, note=INVENTED,
    )  # fmt: skip


def moss_144() -> Pair:
    """Nearly edge-on; around conjunction no separation could be measured."""
    elements = Elements(33.2, 1991.6, 0.35, 0.62, 88.6, 134.0, 96.0)
    plans = [
        Campaign("eyepiece", EARLY, 1958.0, 1986.0, 22, 0.05, 1, 2, 0.65),
        Campaign("interferometer", FRINGES, 1984.0, 2021.0, 30, 0.004, 2, 4, 3.0),
    ]
    made = measures(elements, plans, 144)
    blurred = (made.technique == "eyepiece") & (made.rho < 0.22)
    columns = {"rho": np.where(blurred, np.nan, made.rho)}
    columns["rho_err"] = np.where(blurred, np.nan, made.rho_err)
    columns["note"] = np.where(blurred, "elongated, separation not measured", made.note)
    return Pair(
        "Moss 144", replace(made, **columns), ra_deg=98.1, dec_deg=8.4, parallax_mas=41.5,
        parallax_err_mas=0.6, magnitude_primary=6.4, magnitude_secondary=6.5, note=INVENTED,
    )  # fmt: skip


def lantern_5() -> Pair:
    """Nearly circular and seen almost face-on."""
    elements = Elements(21.7, 1999.2, 0.02, 0.48, 171.0, 48.0, 130.0)
    plans = [
        Campaign("camera", LATE, 1992.0, 2016.0, 18, 0.03, 1, 3, 0.6),
        Campaign("interferometer", FRINGES, 2001.0, 2025.0, 20, 0.004, 2, 4, 3.0),
    ]
    return Pair(
        "Lantern 5", measures(elements, plans, 5), ra_deg=301.9, dec_deg=63.7, parallax_mas=44.0,
        parallax_err_mas=0.3, magnitude_primary=8.0, magnitude_secondary=8.2, note=INVENTED,
    )  # fmt: skip


def heron_77() -> Pair:
    """A short arc, a quarter of a revolution."""
    elements = Elements(310.0, 2046.0, 0.38, 2.6, 63.0, 158.0, 74.0)
    plans = [
        Campaign("eyepiece", EARLY, 1946.0, 1985.0, 18, 0.06, 1, 2, 0.5),
        Campaign("camera", LATE, 1999.0, 2024.0, 16, 0.015, 2, 3, 0.28),
    ]
    return Pair(
        "Heron 77", measures(elements, plans, 77), ra_deg=187.3, dec_deg=-31.0, parallax_mas=45.0,
        parallax_err_mas=0.2, magnitude_primary=7.0, magnitude_secondary=8.4, note=INVENTED,
    )  # fmt: skip


def tarn_31_list() -> str:
    """The measures of Tarn 31 as a list of date: theta counted from the north of its epoch."""
    pair = tarn_31()
    m = pair.measures
    of_date = replace(m, equinox=np.full(len(m), "date"), theta=np.full(len(m), 10.0))
    place = pair.ra_deg, pair.dec_deg, pair.pm_ra_mas_yr, pair.pm_dec_mas_yr
    theta = (m.theta + 10.0 - reduce_to_j2000(of_date, *place).theta) % 360.0
    lines = [
        f"# Tarn 31. {INVENTED}",
        "# theta: equinox of date. Errors are standard deviations.",
        "epoch,theta,rho,theta_err,rho_err,technique,observer,aperture [m],nights,equinox",
    ]
    for k in range(len(m)):
        digits = (1, 2) if m.technique[k] == "eyepiece" else (2, 3)
        lines.append(
            f"{m.epoch[k]:.3f},{theta[k]:.{digits[0]}f},{m.rho[k]:.{digits[1]}f},"
            f"{_or_empty(m.theta_err[k], digits[0] + 1)},{_or_empty(m.rho_err[k], digits[1] + 1)},"
            f"{m.technique[k]},{m.observer[k]},{m.aperture_m[k]:g},{m.nights[k]:.0f},date"
        )
    return "\n".join(lines) + "\n"


def _or_empty(value: float, digits: int) -> str:
    return f"{value:.{digits}f}" if np.isfinite(value) else ""


SLATE = Elements(27.6, 2009.4, 0.28, 0.94, 141.0, 33.0, 305.0)
SLATE_LAYOUT = """\
# How slate_19_mail.txt is set out: an invented list in fixed columns, for relorbit intake.
form = "fixed"
skip = 7
comment = ["*"]
decimal = ","
missing = ["...", "--"]

[columns.epoch]
start = 1
end = 13

[columns.theta]
start = 14
end = 20

[columns.rho]
start = 21
end = 27
unit = "mas"

[columns.technique]
start = 28
end = 30

[columns.observer]
start = 31
end = 34

[columns.nights]
start = 35
end = 37

[columns.note]
start = 39
end = 70

[techniques]
M = "eyepiece"
K = "camera"

[observers]
VO = "I. Vornath"
SD = "T. Seddevar"
AB = "N. Abruzel"

[constants]
equinox = "date"
"""


def slate_19_mail() -> str:
    """A list as it might arrive by mail: mixed dates, decimal commas, slips and repeats."""
    plans = [
        Campaign("eyepiece", ("VO",), 1994.0, 2004.0, 9, 0.06, 1, 3, 0.35, (2, 4)),
        Campaign("camera", ("SD", "AB"), 2003.0, 2025.4, 19, 0.02, 2, 3, 0.28, (1, 3)),
    ]
    made = measures(SLATE, plans, 19)
    rows = [_mail_row(made, k) for k in range(len(made))]
    rows[5] = _mail_row(made, 5, theta=(made.theta[5] + 180.0) % 360.0, note="clouds, hurried")
    rows[14] = _mail_row(made, 14, rho=made.rho[14] / 10.0)
    rows[9] = _mail_row(made, 9, rho=np.nan, note="seeing poor, angle only")
    rows.insert(18, rows[16])
    rows.append(rows[20])
    heading = [
        "Dear friend, here is my list of Slate 19, the old nights first. The dates are",
        "as they stand in my books. M is the micrometer, K the camera; separations in",
        f"thousandths of a second. ({INVENTED[:-1]}.)",
        "",
        "date          theta   sep  how who n  remark",
        "              deg     mas",
        "----------------------------------------------------------------------",
    ]
    return "\n".join([*heading, *rows[:12], "* new camera from here on", *rows[12:]]) + "\n"


def _mail_row(
    m: Measures, k: int, theta: float | None = None, rho: float | None = None, note: str = ""
) -> str:
    theta = m.theta[k] if theta is None else theta
    rho = m.rho[k] if rho is None else rho
    separation = "..." if np.isnan(rho) else f"{rho * 1000.0:.0f}"
    how = "M" if m.technique[k] == "eyepiece" else "K"
    angle = f"{theta:.{1 if how == 'M' else 2}f}".replace(".", ",")
    row = f"{_mail_date(m.epoch[k], k):<13}{angle:>7} {separation:>5}  {how:<3}{m.observer[k]:<4}"
    return f"{row}{m.nights[k]:>2.0f}  {note}".rstrip()


def _mail_date(epoch: float, k: int) -> str:
    """The epoch as a fraction of a year, a date with a decimal day, or day month year."""
    if k % 3 == 0:
        return f"{epoch:.3f}".replace(".", ",")
    # days from J2000.0 = 2000 January 1.5, as numpy counts them from a midnight
    days = (epoch - 2000.0) * 365.25 + 0.5
    date = np.datetime64("2000-01-01") + np.timedelta64(int(np.floor(days)), "D")
    year, month, day = str(date).split("-")
    if k % 3 == 1:
        return f"{year}-{month}-{float(day) + days % 1.0:04.1f}".replace(".", ",")
    return f"{day}.{month}.{year}"


README = """\
# Example measures

**Everything here is invented.** No star of these names exists, nobody of these names observes, and
nothing was measured: elements were made up and measures drawn from them with random errors, by
`tests/make_examples.py` (seeded; it makes the same files again).

| file | what it is | elements it was made from (P, T, e, a, i, node, omega) |
|---|---|---|
| `tarn_31.csv` | a plain list of date: 1.5 revolutions, eyepiece, plate and camera | 62.4, 1978.31, 0.42, 1.85, 52, 71, 214 |
| `tarn_31.ecsv` | the same as a pair file, at J2000, with position, proper motion, parallax | the same |
| `quill_8.ecsv` | very eccentric, periastron poorly covered | 148, 1957.9, 0.905, 1.32, 117, 22, 281 |
| `moss_144.ecsv` | nearly edge-on, some rows without a separation | 33.2, 1991.6, 0.35, 0.62, 88.6, 134, 96 |
| `lantern_5.ecsv` | nearly circular, seen almost face-on | 21.7, 1999.2, 0.02, 0.48, 171, 48, 130 |
| `heron_77.ecsv` | a short arc, a quarter of a revolution | 310, 2046, 0.38, 2.6, 63, 158, 74 |
| `slate_19_mail.txt` | a messy list as it might come by mail: mixed dates, decimal commas, a swapped quadrant, a misplaced decimal, repeats | 27.6, 2009.4, 0.28, 0.94, 141, 33, 305 |
| `slate_19_mail.toml` | its layout, for `relorbit intake --layout` | |

The errors the measures were drawn with are those they state; the eyepiece rows of Tarn 31 state
none and have 0.09 arcsec in x and y on one night.
"""


def main(folder: Path) -> None:
    folder.mkdir(parents=True, exist_ok=True)
    for make in (tarn_31, quill_8, moss_144, lantern_5, heron_77):
        target = folder / f"{make.__name__}.ecsv"
        target.unlink(missing_ok=True)
        make().write(target)
    for name, text in (
        ("tarn_31.csv", tarn_31_list()),
        ("slate_19_mail.txt", slate_19_mail()),
        ("slate_19_mail.toml", SLATE_LAYOUT),
        ("README.md", README),
    ):
        write_text_atomically(folder / name, text)


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parents[1] / "example_measures")
