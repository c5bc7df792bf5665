"""The rows of a pair file are what astropy would write."""

from __future__ import annotations

import io

import numpy as np
from astropy.table import MaskedColumn, Table

from relorbit.measures.pair import Pair
from relorbit.measures.store import pair_text
from relorbit.measures.table import NUMBERS, Measures

NASTY = ["", 'a "quoted" word', "#hash", "comma, here", "'single'", "nan", "None", "--", "N/A",
         "\u00fcn\u00ef \u03b8", '"', "a\\b", "0", "True", "1.0", ";", "|", '""x', 'x""',
         "\u200b", "=1+1", "%ECSV"]  # fmt: skip


def measures(count: int) -> Measures:
    rng = np.random.default_rng(count)
    values = np.array([0.0, 1e-7, 359.99999999, 1e16, 1e-300, 2000.1234567890123, 0.1, 1 / 3])
    rho = rng.choice(values, count)
    rho[::5] = np.nan
    return Measures.from_columns(
        {
            "epoch": 1900 + 100 * rng.random(count), "theta": rng.choice(values[:3], count),
            "rho": rho, "theta_err": [None] * (count - 1) + [0.5], "use": rng.random(count) < 0.5,
            "flip": rng.random(count) < 0.5, "observer": rng.choice(NASTY, count),
            "note": rng.choice(NASTY, count), "reason": rng.choice(NASTY, count),
        }
    )  # fmt: skip


def by_astropy(text: str, of: Measures) -> str:
    """The same file written by astropy's own writer, from the columns its header names."""
    header = Table.read(text, format="ascii.ecsv")
    table = Table(meta=header.meta)
    for name in header.colnames:
        values = getattr(of, name)
        mask = np.isnan(values) if name in NUMBERS else np.zeros(len(values), dtype=bool)
        about = {"unit": header[name].unit, "description": header[name].description}
        table[name] = MaskedColumn(values, mask=mask, **about)
    out = io.StringIO()
    table.write(out, format="ascii.ecsv", delimiter=",")
    return out.getvalue()


def test_byte_for_byte():
    for count in (1, 7, 300):
        of = measures(count)
        text = pair_text(Pair("Invented 1", of))
        assert text == by_astropy(text, of)
        assert len(text.splitlines()) > count + 10
