"""One list on its way to measures: cells, headings and settings brought together."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from relorbit.errors import InputError
from relorbit.measures import cells, dates, ecsv
from relorbit.measures.cells import Grid
from relorbit.measures.headers import Heading, understand
from relorbit.measures.layout import Layout, LayoutColumn
from relorbit.measures.table import (
    EQUINOX,
    FLAGS,
    NUMBERS,
    TECHNIQUES,
    TEXTS,
    Measures,
    not_an_equinox,
)

_TECHNIQUE_WORDS = {
    **{technique: technique for technique in TECHNIQUES},
    **{
        word: technique
        for technique, words in {
            "eyepiece": "eye visual micrometer filar bifilar filarmicrometer filar-micrometer "
            "doubleimage reticle astrometriceyepiece micrometre",
            "plate": "photo photographic photography photograph plates photographicplate film",
            "camera": "ccd cmos ccdimaging cmosimaging imaging lucky luckyimaging dslr video "
            "webcam ao adaptiveoptics ccdcamera cmoscamera emccd",
            "interferometer": "speckle interferometry specklecamera speckleinterferometry "
            "interferometric aperturemasking longbaseline longbaselineinterferometry",
            "space": "satellite fromspace spaceborne",
            "unknown": "? other unspecified",
        }.items()
        for word in words.split()
    },
}


@dataclass(frozen=True)
class Rows:
    """What `ListReader` read; the attributes are those of `relorbit.measures.intake.Intake`."""

    measures: Measures
    lines: np.ndarray
    skipped: tuple[tuple[int, str], ...]
    columns: Mapping[str, str]


class ListReader:
    """One list on its way to measures."""

    def __init__(
        self,
        path: str,
        layout: Layout | None,
        equinox: str | None,
        technique: str | None,
        observer: str | None,
    ) -> None:
        self.path = path
        self.layout = layout or Layout("", "")
        constants = self.layout.constants
        self.defaults = {
            name: said if said is not None else constants.get(name)
            for name, said in (
                ("technique", technique), ("equinox", equinox), ("observer", observer)
            )
        }  # fmt: skip
        self.defaults |= {k: v for k, v in constants.items() if k not in self.defaults}
        self.usual_missing = cells.MISSING

    def read(self, lines: list[str], allow_any_epoch: bool) -> Rows:
        grid, headings, settings = self.cut(lines)
        if not grid.rows:
            raise InputError(
                "a header but no measures; add a line for each measure", path=self.path
            )
        self.require(headings)
        columns = {
            h.column: self.values(h, settings.get(h.column), grid) for h in headings if h.column
        }
        self.epochs(columns, headings, settings, grid)
        self.fill(columns, len(grid.rows))
        skipped = list(grid.skipped)
        keep = self.rows_with_something(columns, grid, skipped)
        columns = {name: [v for v, k in zip(values, keep, strict=True) if k]
                   for name, values in columns.items()}  # fmt: skip
        numbers = np.array(grid.lines)[keep]
        names = {h.column: h.name for h in headings if h.column}
        measures = Measures.from_columns(
            columns, self.path, lines=numbers, headers=names, allow_any_epoch=allow_any_epoch
        )
        understood = {heading.name: heading.meaning for heading in headings}
        return Rows(measures, numbers, tuple(sorted(skipped)), understood)

    def fail_line(self, line: int, what: str) -> InputError:
        return InputError(what, path=self.path, line=line or None)

    def fail_heading(self, name: str, what: str) -> InputError:
        return InputError(what, path=self.path, column=name)

    def cut(
        self, lines: list[str]
    ) -> tuple[Grid, tuple[Heading, ...], dict[str, LayoutColumn]]:
        """Cells, headings, and what the layout says of each column."""
        layout = self.layout
        settings = {column.column: column for column in layout.columns}
        ways = {"skip": layout.skip, "comments": layout.comment}
        if layout.form == "fixed":
            spans = [(c.column, c.start, c.end) for c in layout.columns]
            grid = cells.cut_fixed(lines, spans, **ways)
            return grid, self.by_layout(grid.names, list(range(len(spans)))), settings
        if ecsv.is_ecsv(lines) and not layout.form:
            header = ecsv.read_header(lines, self.path)
            self.usual_missing = frozenset({""})
            if ecsv.KEY in header.meta and self.defaults["equinox"] is None:
                self.defaults["equinox"] = "J2000"
            return self.cut_ecsv(lines, header)
        names = None
        if not layout.header:
            names = self.names_by_place()
        grid = cells.cut_delimited(
            lines, self.fail_line, delimiter=layout.delimiter, names=names, **ways
        )
        if not settings:
            return grid, understand(grid.names, self.fail_heading), settings
        if layout.header:
            places = [self.place_of(column, grid.names) for column in layout.columns]
        else:
            places = [column.place - 1 for column in layout.columns]
        return grid, self.by_layout(grid.names, places), settings

    def cut_ecsv(
        self, lines: list[str], header: ecsv.EcsvHeader
    ) -> tuple[Grid, tuple[Heading, ...], dict[str, LayoutColumn]]:
        first = next((line for line in lines if line.strip() and line.lstrip('"')[0] != "#"), "")
        delimiter = header.delimiter
        if delimiter not in first:  # saved again by a program with a delimiter of its own
            delimiter = ""
        grid = cells.cut_delimited(
            lines, self.fail_line, comments=("#",), delimiter=delimiter
        )
        units = [header.units.get(name, "") for name in grid.names]
        return grid, understand(grid.names, self.fail_heading, units), {}

    def names_by_place(self) -> list[str]:
        width = max(column.place for column in self.layout.columns)
        names = [f"cell {place}" for place in range(1, width + 1)]
        for column in self.layout.columns:
            names[column.place - 1] = column.column
        return names

    def place_of(self, column: LayoutColumn, names: list[str]) -> int:
        wanted = column.header.strip().lower()
        for index, name in enumerate(names):
            if name.strip().lower() == wanted:
                return index
        listed = ", ".join(names)
        raise self.fail_heading(
            column.header, f"the layout names this column, the list has only {listed}"
        )

    def by_layout(self, names: list[str], places: list[int]) -> tuple[Heading, ...]:
        said = dict(zip(places, self.layout.columns, strict=True))
        return tuple(
            Heading(name, index, said[index].column, said[index].unit, said[index].kind)
            if index in said
            else Heading(name, index)
            for index, name in enumerate(names)
        )

    def require(self, headings: tuple[Heading, ...]) -> None:
        columns = {heading.column for heading in headings}
        has = ", ".join(heading.name for heading in headings if heading.name)
        if "epoch" not in columns and not {"year", "month", "day"} <= columns:
            what = "no column for the epoch; name it epoch, date, JD or MJD"
        elif not {"theta", "rho"} & columns:
            what = "no column for the position angle (theta) nor the separation (rho)"
        else:
            return
        raise InputError(f"{what}; the columns are {has}", path=self.path)

    def values(self, heading: Heading, said: LayoutColumn | None, grid: Grid) -> list:
        """The values of one column; those of epochs are still text."""
        texts = grid.column(heading.index)
        missing = self.usual_missing | self.layout.missing
        missing |= said.missing if said else frozenset()

        def fail(index: int, what: str) -> InputError:
            line = grid.lines[index]
            return InputError(what, path=self.path, line=line, column=heading.name)

        if heading.column in NUMBERS and heading.column != "epoch":
            first, second = heading.scale
            return cells.numbers(
                texts,
                fail,
                scale=(first * said.factor, second) if said else (first, second),
                offset=said.offset * first / second if said else 0.0,
                missing=missing,
                decimal=self.layout.decimal,
            ).tolist()
        texts = ["" if t in missing or t.lower() in missing else t for t in texts]
        if heading.column == "technique":
            return [self.technique(t, i, fail) for i, t in enumerate(texts)]
        if heading.column == "equinox":
            return [_equinox(t) for t in texts]
        if heading.column == "observer":
            return [self.layout.observers.get(t, t) for t in texts]
        return texts

    def technique(self, text: str, index: int, fail: cells.Fail) -> str | None:
        if not text:
            return None
        if text in self.layout.techniques:
            return self.layout.techniques[text]
        word = re.sub(r"[\s_-]+", "", text.lower())
        if word not in _TECHNIQUE_WORDS:
            known = ", ".join(TECHNIQUES)
            raise fail(index, f"{text!r} is not a technique; use one of {known}")
        return _TECHNIQUE_WORDS[word]

    def epochs(
        self,
        columns: dict[str, list],
        headings: tuple[Heading, ...],
        settings: dict[str, LayoutColumn],
        grid: Grid,
    ) -> None:
        """Turn the text of epochs, or of year, month and day, into Julian years."""
        of = {heading.column: heading for heading in headings}
        if "epoch" in of:
            heading, said = of["epoch"], settings.get("epoch", LayoutColumn("epoch"))
            texts, kind = columns["epoch"], heading.kind
        else:
            heading, said, kind = of["day"], LayoutColumn("day"), "date"
            parts = [columns.pop(name) for name in ("year", "month", "day")]
            texts = ["-".join(part) if any(part) else "" for part in zip(*parts, strict=True)]

        def fail(index: int, what: str) -> InputError:
            line = grid.lines[index]
            return InputError(what, path=self.path, line=line, column=heading.name)

        columns["epoch"] = dates.julian_years(
            texts, kind, fail, pattern=said.pattern, factor=said.factor, offset=said.offset
        ).tolist()
        received = columns.get("epoch_obs", [""] * len(texts))
        columns["epoch_obs"] = [
            old or ("" if _is_that(text, year) else text)
            for old, text, year in zip(received, texts, columns["epoch"], strict=True)
        ]

    def fill(self, columns: dict[str, list], count: int) -> None:
        """Put what holds for the whole list where a row does not say."""
        for name, value in self.defaults.items():
            if value is not None:
                if name == "equinox":
                    value = _equinox(value)
                    if not EQUINOX.fullmatch(value):
                        raise InputError(not_an_equinox(value))
                if name == "technique":
                    value = self.technique(value, 0, lambda _, what: InputError(what))
                given = columns.get(name, [None] * count)
                empty = "" if name in (*TEXTS, *FLAGS) else None
                columns[name] = [
                    value if v is None or v == empty or v != v else v for v in given
                ]
        if self.defaults["equinox"] is None:
            given = columns.get("equinox", [""] * count)
            techniques = columns.get("technique", [None] * count)
            columns["equinox"] = [
                text or ("J2000" if technique == "space" else "date")
                for text, technique in zip(given, techniques, strict=True)
            ]

    def rows_with_something(
        self, columns: dict[str, list], grid: Grid, skipped: list[tuple[int, str]]
    ) -> np.ndarray:
        count = len(grid.rows)
        nothing = [np.nan] * count
        theta = np.isnan(columns.get("theta", nothing))
        rho = np.isnan(columns.get("rho", nothing))
        empty = theta & rho
        skipped += [(grid.lines[i], "neither theta nor rho") for i in np.flatnonzero(empty)]
        return ~empty


def _is_that(text: str, year: float) -> bool:
    """True when the cell is just the Julian year."""
    try:
        return float(text) == year
    except ValueError:
        return not text


def _equinox(text: str) -> str:
    word = text.strip()
    if word.lower() in ("date", "of date", "ofdate", "mean of date"):
        return "date"
    if word.upper() in ("J2000", "J2000.0", "2000", "2000.0", "ICRS"):
        return "J2000"
    return word.upper() if re.fullmatch(r"[bj][0-9.]+", word) else word
