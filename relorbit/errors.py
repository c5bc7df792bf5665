"""The kinds of failure an observer can meet, and what each one carries."""

from __future__ import annotations

from os import PathLike, fspath


class RelorbitError(Exception):
    """Anything that relorbit refuses or cannot do, said in words for the observer."""


class InputError(RelorbitError, ValueError):
    """Something given is wrong; the command line leaves with exit status 2.

    Parameters
    ----------
    what : str
        What is wrong and what would be right, in one line.
    path : str or path, optional
        The file it was found in.
    line : int, optional
        The line of the file, from 1.
    column : str, optional
        The column, as the file heads it.
    row : int, optional
        The row of a table that has no lines, from 1.

    Notes
    -----
    The message is ``path, line 3, column theta: what``, of which only the known parts appear.
    """

    def __init__(
        self,
        what: str,
        *,
        path: str | PathLike[str] | None = None,
        line: int | None = None,
        column: str | None = None,
        row: int | None = None,
    ) -> None:
        self.what = what
        self.path = None if path is None else fspath(path)
        self.line = line
        self.column = column
        self.row = row
        place = [] if self.path is None else [self.path]
        if line is not None:
            place.append(f"line {line}")
        elif row is not None:
            place.append(f"row {row}")
        if column is not None:
            place.append(f"column {column}")
        # One argument, so that the error survives the way back from another process.
        super().__init__(": ".join(filter(None, (", ".join(place), what))))


class Undetermined(RelorbitError):
    """The measures do not say what was asked; the command line leaves with exit status 3.

    Parameters
    ----------
    reason : str
        Why not, and what would cure it, in words.
    code : str
        The reason as one fixed word for programs.
    known : dict, optional
        What the measures do say, such as a lower limit of the period.
    """

    def __init__(self, reason: str, code: str = "undetermined", known: dict | None = None) -> None:
        self.reason = reason
        self.code = code
        self.known = dict(known or {})
        super().__init__(reason)

    def to_dict(self) -> dict:
        """For JSON, schema relorbit/undetermined/1."""
        return {
            "schema": "relorbit/undetermined/1",
            "code": self.code,
            "reason": self.reason,
            "known": self.known,
        }
