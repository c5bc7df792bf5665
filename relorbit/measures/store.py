"""The pair file: one ECSV file (astropy APE 6) that holds a pair, its measures and its orbits."""

from __future__ import annotations

import csv
import io
from os import PathLike
from pathlib import Path
from typing import Any

import numpy as np

from relorbit.errors import InputError
from relorbit.measures import cells, ecsv
from relorbit.measures.files import PREVIOUS, read_text, write_text_atomically
from relorbit.measures.intake import read_list
from relorbit.measures.pair import Pair, RecordedOrbit
from relorbit.measures.table import NUMBERS, TEXTS, Measures

FORMAT = 1

__all__ = ["FORMAT", "PREVIOUS", "pair_text", "read_pair", "write_pair", "write_text_atomically"]

_DESCRIPTIONS = {
    "epoch": ("yr", "Julian epoch, TT"),
    "theta": ("deg", "position angle from north through east"),
    "rho": ("arcsec", "separation"),
    "theta_err": ("deg", "standard deviation of theta"),
    "rho_err": ("arcsec", "standard deviation of rho"),
    "weight": (None, "relative weight"),
    "technique": (None, "eyepiece, plate, camera, interferometer, space or unknown"),
    "observer": (None, "who measured"),
    "aperture_m": ("m", "aperture of the telescope"),
    "nights": (None, "number of nights in the mean"),
    "use": (None, "False for a measure set aside"),
    "flip": (None, "True where the two stars were taken one for the other"),
    "reason": (None, "why a measure is set aside or flipped"),
    "note": (None, "remark"),
    "equinox": (None, "what theta is counted from: J2000, date, or a year"),
    "theta_obs": ("deg", "position angle as received"),
    "epoch_obs": (None, "epoch as received"),
    "rho_obs": ("arcsec", "separation as received"),
    "vetted": (None, "what relorbit vet changed, for --undo"),
}
_ALWAYS = (
    "epoch", "theta", "rho", "theta_err", "rho_err", "technique", "observer", "use", "equinox",
)  # fmt: skip


def read_pair(path: str | PathLike[str], *, allow_any_epoch: bool = False) -> Pair:
    """Read a pair file, or a plain list with a header line.

    A plain list (CSV, TSV, semicolons, blanks) gives a pair of unknown identity, named after the
    file; its rows are at equinox J2000 unless the list says otherwise.

    Parameters
    ----------
    path : path
        The file.
    allow_any_epoch : bool
        Also take epochs before 1600 or after 2200.

    Raises
    ------
    InputError
        When it cannot be read; names file, line and column.
    """
    lines = cells.physical_lines(read_text(path))
    record = None
    if ecsv.is_ecsv(lines):
        record = ecsv.read_header(lines, path).meta.get(ecsv.KEY)
    who, orbits = _identity(record, path) if record is not None else ({}, ())
    if record is not None and _is_empty(lines):
        measures = Measures.from_columns({"epoch": [], "theta": [], "rho": []})
    else:
        intake = read_list(path, equinox="J2000", allow_any_epoch=allow_any_epoch)
        for line, why in intake.skipped:
            if why.startswith("neither"):
                what = f"{why}; a measure needs at least one of them"
                raise InputError(what, path=path, line=line)
        unread = [name for name, meaning in intake.columns.items() if not meaning]
        if record is not None and unread:
            raise InputError(
                "not a column of a pair file, and would be lost in saving; move it into note",
                path=path,
                column=unread[0],
            )
        measures = intake.measures
    try:
        return Pair(**{"name": Path(path).stem, **who}, measures=measures, orbits=orbits)
    except (InputError, TypeError) as error:
        raise InputError(f"the header's pair: {error}", path=path) from None


def require_pair_file(path: str | PathLike[str]) -> None:
    """Raise InputError where `path` is a plain list, which cannot keep an orbit."""
    if not ecsv.is_ecsv(cells.physical_lines(read_text(path))):
        raise InputError(
            "is a plain list, which has no place for an orbit; make a pair file of it with "
            "relorbit intake",
            path=path,
        )


def write_pair(pair: Pair, path: str | PathLike[str]) -> None:
    """Write a pair file, whole or not at all; the last version is kept as ``NAME.previous``.

    Raises
    ------
    InputError
        When it cannot be written; the old file then stands.
    """
    write_text_atomically(path, pair_text(pair), keep_previous=True)


def _is_empty(lines: list[str]) -> bool:
    """True when nothing but the header line follows the lines with #."""
    return sum(bool(ln.strip(' ",;\t')) and ln.lstrip(' "')[0] != "#" for ln in lines) <= 1


def _identity(
    record: Any, path: str | PathLike[str]
) -> tuple[dict[str, Any], tuple[RecordedOrbit, ...]]:
    """Who the pair is, and its orbits, from the file's metadata."""
    version = record.get("format") if isinstance(record, dict) else None
    if not isinstance(version, int) or version < 1:
        raise InputError(
            f"the header names no format of a pair file; it must say format: {FORMAT}", path=path
        )
    if version > FORMAT:
        raise InputError(
            f"written by a newer relorbit (format {version}); this one reads up to {FORMAT}; "
            "install a newer one",
            path=path,
        )
    who = record.get("pair") or {}
    known = set(Pair("", Measures.from_columns({"epoch": [], "rho": []})).identity())
    if not isinstance(who, dict) or set(who) - known:
        strange = ", ".join(sorted(set(who) - known)) if isinstance(who, dict) else who
        raise InputError(
            f"the header's pair has {strange}; it may have {', '.join(sorted(known))}", path=path
        )
    if "name" in who:  # a name such as 61 is a number to YAML, when written by hand
        who["name"] = str(who["name"])
    try:
        orbits = tuple(RecordedOrbit.from_dict(one) for one in record.get("orbits") or ())
    except (InputError, TypeError, ValueError) as error:
        raise InputError(str(error), path=path) from None
    return who, orbits


def pair_text(pair: Pair) -> str:
    """The pair file as text."""
    from astropy.table import MaskedColumn, Table

    table = Table()
    columns = []
    for name, (unit, description) in _DESCRIPTIONS.items():
        values = getattr(pair.measures, name)
        if name not in _ALWAYS and not _holds_anything(name, values):
            continue
        # astropy writes the header; the rows are plain CSV, and quick to write here
        table[name] = MaskedColumn(values[:0], name=name, unit=unit, description=description)
        cells = values.tolist()
        columns.append(["" if v != v else v for v in cells] if name in NUMBERS else cells)
    who = {k: v for k, v in pair.identity().items() if v not in (None, "", [])}
    orbits = [orbit.to_dict() for orbit in pair.orbits]
    table.meta[ecsv.KEY] = {"format": FORMAT, "pair": who, "orbits": orbits}
    text = io.StringIO()
    table.write(text, format="ascii.ecsv", delimiter=",")
    csv.writer(text, lineterminator="\n").writerows(zip(*columns, strict=True))
    return text.getvalue()


def _holds_anything(name: str, values: np.ndarray) -> bool:
    if name in NUMBERS:
        return not np.isnan(values).all()
    return bool((values != TEXTS.get(name, False)).any())
