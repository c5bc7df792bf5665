"""Samples in a file: ECSV or FITS, with everything that is needed to make them again."""

from __future__ import annotations

import json
from importlib.metadata import version
from io import BytesIO
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from relorbit.errors import InputError
from relorbit.measures.files import write_text_atomically
from relorbit.orbit.elements import Elements, projection
from relorbit.solve.observations import Observations
from relorbit.solve.posterior import Posterior
from relorbit.solve.prior import Prior
from relorbit.solve.solution import Notice
from relorbit.solve.weighing import NoiseGroup

if TYPE_CHECKING:
    from astropy.table import Table

SCHEMA = "relorbit/samples/1"
FORMATS = {".ecsv": "ascii.ecsv", ".fits": "fits"}
COLUMNS = {
    "P": "yr", "T": "yr", "e": "", "a": "arcsec", "i": "deg", "node": "deg", "omega": "deg",
    "mass": "solMass", "weight": "", "chi2": "", "parallax": "mas", "mode": "",
}  # fmt: skip
_SCALARS = (
    "pair", "effective_size", "pareto_k", "log_evidence", "drawn", "reference_epoch", "size",
    "seed", "error_scale", "parallax_mas", "parallax_err_mas", "errors",
)  # fmt: skip
_MEASURED = ("epoch", "theta", "rho", "per_theta", "per_rho")


def table_of(posterior: Posterior) -> Table:
    """An astropy Table of the samples; its metadata says how they were made.

    T is a Julian year; mass and parallax are there where the pair has a parallax.
    """
    from astropy.table import Table

    table = Table()
    for name, unit in COLUMNS.items():
        values = getattr(posterior, name)
        if values is not None:
            table[name] = values
            if unit:
                table[name].unit = unit
    table.meta = {"relorbit": _account(posterior)}
    return table


def _account(posterior: Posterior) -> dict[str, Any]:
    """What made the samples: version, seed, size, prior, and the measures as used."""
    measured = {name: getattr(posterior.observations, name).tolist() for name in _MEASURED}
    return {
        "schema": SCHEMA,
        "version": version("relorbit"),
        **{name: _plain(getattr(posterior, name)) for name in _SCALARS},
        "prior": posterior.prior.to_dict(),
        "warnings": [one.to_dict() for one in posterior.warnings],
        "noise": [group.to_dict() for group in posterior.noise],
        "measures": measured,
    }


def _plain(value: Any) -> Any:
    value = value.item() if isinstance(value, np.generic) else value
    return None if isinstance(value, float) and not np.isfinite(value) else value


def write_samples(posterior: Posterior, path: str | PathLike[str]) -> None:
    """Write samples as ECSV or FITS, by the suffix of the name, whole or not at all.

    Raises
    ------
    InputError
        For another suffix, or when the file cannot be written.
    """
    suffix = check_samples_name(path)
    table = table_of(posterior)
    page = BytesIO()
    if suffix == ".fits":
        # FITS headers hold short words only: the account goes in as one line of JSON
        table.meta = {"ACCOUNT": json.dumps(table.meta["relorbit"])}
        from astropy.io import fits

        hdu = fits.table_to_hdu(_without_meta(table))
        text = np.array([table.meta["ACCOUNT"]], dtype="S")
        column = fits.Column("account", f"{text.dtype.itemsize}A", array=text)
        note = fits.BinTableHDU.from_columns([column], name="ACCOUNT")
        hdu.name = "SAMPLES"
        fits.HDUList([fits.PrimaryHDU(), hdu, note]).writeto(page)
        write_text_atomically(path, page.getvalue())
        return
    from io import StringIO

    lines = StringIO()
    table.write(lines, format="ascii.ecsv", delimiter=",")
    write_text_atomically(path, lines.getvalue().encode("utf-8"))


def _without_meta(table: Table) -> Table:
    bare = table.copy()
    bare.meta = {}
    return bare


def check_samples_name(path: str | PathLike[str]) -> str:
    """The suffix of a samples file; InputError where it is none of `FORMATS`."""
    suffix = Path(path).suffix.lower()
    if suffix not in FORMATS:
        raise InputError("samples are written as .ecsv or .fits; name the file so", path=path)
    return suffix


def read_samples(path: str | PathLike[str]) -> Posterior:
    """The samples that `write_samples` wrote.

    Raises
    ------
    InputError
        When the file is not there, damaged, or holds something else.
    """
    suffix = check_samples_name(path)
    if not Path(path).is_file():
        raise InputError("no such file; make it with sample --out", path=path)
    try:
        table, account = _read(path, suffix)
        if account.get("schema") != SCHEMA:
            raise ValueError(f"its schema is {account.get('schema')!r}, not {SCHEMA}")
        return _posterior(table, account)
    except Exception as error:  # the readers of astropy raise many kinds
        detail = " ".join(str(error).split()[:14])
        raise InputError(f"not a file of samples, or damaged: {detail}", path=path) from None


def _read(path: str | PathLike[str], suffix: str) -> tuple[Table, dict[str, Any]]:
    from astropy.table import Table

    if suffix == ".ecsv":
        table = Table.read(path, format="ascii.ecsv")
        return table, dict(table.meta["relorbit"])
    table = Table.read(path, format="fits", hdu="SAMPLES")
    note = Table.read(path, format="fits", hdu="ACCOUNT")
    text = note["account"][0]
    return table, json.loads(text.decode() if isinstance(text, bytes) else str(text))


def _posterior(table: Table, account: dict[str, Any]) -> Posterior:
    columns = {name: np.array(table[name], dtype=float) for name in table.colnames}
    columns.pop("mass", None)
    names = ("P", "T", "e", "a", "i", "node", "omega")
    alpha, beta = _projections(*(columns[name] for name in names))
    rows = len(account["measures"]["epoch"])
    measured = [np.array(account["measures"][name], dtype=float) for name in _MEASURED]
    said = {name: account[name] for name in _SCALARS}
    said["pareto_k"] = np.nan if said["pareto_k"] is None else said["pareto_k"]
    prior = {name: tuple(value) if isinstance(value, list) else value
             for name, value in account["prior"].items()}  # fmt: skip
    return Posterior(
        alpha=alpha, beta=beta, mode=columns.pop("mode").astype(np.intp),
        parallax=columns.pop("parallax", None), prior=Prior(**prior),
        observations=Observations(*measured, np.arange(rows), np.zeros(rows, dtype=bool)),
        noise=tuple(_group(one) for one in account["noise"]),
        warnings=tuple(Notice(**one) for one in account["warnings"]), **said, **columns,
    )  # fmt: skip


def _group(said: dict[str, Any]) -> NoiseGroup:
    fields = {name: said[name] for name in NoiseGroup.__dataclass_fields__}
    return NoiseGroup(**{name: tuple(value) if isinstance(value, list) else value
                         for name, value in fields.items()})  # fmt: skip


def _projections(*columns: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    both = np.array([projection(Elements(*map(float, row))) for row in zip(*columns, strict=True)])
    return both[:, 0], both[:, 1]
