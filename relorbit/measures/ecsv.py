"""The header of an ECSV file (astropy APE 6), also after a spreadsheet has been over it."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from os import PathLike
from typing import Any

from relorbit.errors import InputError

KEY = "relorbit"


@dataclass(frozen=True)
class EcsvHeader:
    """What the header of an ECSV file says.

    Attributes
    ----------
    units : dict of str to str
        The unit of each column that has one.
    delimiter : str
        Comma or space.
    meta : dict
        The metadata.
    """

    units: dict[str, str]
    delimiter: str
    meta: dict[str, Any]


def is_ecsv(lines: Sequence[str]) -> bool:
    """True when the first line announces an ECSV file."""
    return bool(lines) and bool(re.match(r'"?#\s*%ECSV\b', lines[0]))


def read_header(lines: Sequence[str], path: str | PathLike[str]) -> EcsvHeader:
    """The header of an ECSV file.

    Raises
    ------
    InputError
        When it is damaged.
    """
    from astropy.table.meta import get_header_from_yaml

    body = []
    # A spreadsheet puts a line with commas in quotation marks, and commas behind short ones.
    padded = lines[0].endswith((",", ";", "\t"))
    for line in lines[1:]:
        text = re.sub(r"[,;\t]+$", "", line) if padded else line
        if text.startswith('"') and text.endswith('"'):
            text = text[1:-1].replace('""', '"')
        if not text.startswith("#"):
            break
        body.append(re.sub(r"^# ?", "", text))
    try:
        header = get_header_from_yaml(body)
        columns = header["datatype"]
        units = {str(c["name"]): str(c["unit"]) for c in columns if c.get("unit") is not None}
        meta = dict(header.get("meta") or {})
    except Exception as error:  # the YAML reader raises many kinds, all of them a damaged header
        detail = " ".join(str(error).split()[:12])
        raise InputError(
            f"the header of the file (lines with #) is damaged: {detail}; restore it from the "
            "previous version",
            path=path,
        ) from None
    return EcsvHeader(units, str(header.get("delimiter", " ")), meta)
