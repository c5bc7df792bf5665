"""Which measures share an error: groups by technique, observer, aperture or era."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from relorbit.errors import InputError
from relorbit.measures.table import Measures

GROUPINGS = ("technique", "observer", "aperture", "era")
DEFAULT_GROUPING = ("technique", "observer")
ERA_YEARS = 25  # an era is a quarter of a century where the user names no years
# Edges between classes of aperture, metres: common practice, no published source
APERTURES = (0.2, 0.5, 1.0, 2.5)
ANYONE = "anyone"


def group_names(
    measures: Measures, by: Sequence[str] | str | None = None
) -> tuple[NDArray[np.str_], NDArray[np.str_]]:
    """The group of every measure.

    Parameters
    ----------
    measures : Measures, n rows
    by : sequence of str, or text with commas, optional
        Of "technique", "observer", "aperture" (in classes) and "era" (quarters of a century, or
        ``era:1950/1980`` for eras that begin in these years); technique and observer by default.

    Returns
    -------
    names : array of str, shape (n,)
        Such as ``eyepiece, Alder``.
    parents : array of str, shape (n,)
        The technique where the groups are parts of techniques, else one word for all: what small
        groups are shrunk towards.

    Raises
    ------
    InputError
        For a grouping that does not exist.
    """
    by = groupings(by)
    parts = [_words(measures, word) for word in by]
    if not parts:
        return np.full(len(measures), "all"), np.full(len(measures), "all")
    names = np.array([", ".join(words) for words in zip(*parts, strict=True)], dtype=str)
    parents = measures.technique if "technique" in by else np.full(len(measures), "all")
    return names, parents


def groupings(by: Sequence[str] | str | None) -> tuple[str, ...]:
    """The words of a grouping, each checked; ``none`` puts all measures in one group."""
    if by is None:
        return DEFAULT_GROUPING
    words = [word.strip() for word in by.split(",")] if isinstance(by, str) else list(by)
    if words == ["none"]:
        return ()
    for word in words:
        if word.partition(":")[0] not in GROUPINGS or (":" in word and word[:4] != "era:"):
            raise InputError(
                f"measures cannot be grouped by {word!r}; group them by {', '.join(GROUPINGS)} "
                "(an era also as era:1950/1980), or by none"
            )
    return tuple(dict.fromkeys(words))


def chosen_groups(wanted: Sequence[str] | str, names: Sequence[str]) -> tuple[str, ...]:
    """Group names that are asked for, each checked; ``all`` is every one of them.

    Raises InputError naming the groups there are.
    """
    wanted = [wanted] if isinstance(wanted, str) else list(wanted)
    known = sorted(set(names))
    if wanted == ["all"]:
        return tuple(known)
    for name in wanted:
        if name not in known:
            raise InputError(
                f"no group is called {name!r}; the groups are: {'; '.join(known)}"
            )
    return tuple(dict.fromkeys(wanted))


def _words(measures: Measures, word: str) -> list[str]:
    if word == "technique":
        return measures.technique.tolist()
    if word == "observer":
        return [name or ANYONE for name in measures.observer.tolist()]
    if word == "aperture":
        return [_aperture_class(size) for size in measures.aperture_m.tolist()]
    return _eras(measures.epoch, word)


def _aperture_class(size: float) -> str:
    if not np.isfinite(size):
        return "aperture unknown"
    above = int(np.searchsorted(APERTURES, size, side="right"))
    if above == 0:
        return f"below {APERTURES[0]:g} m"
    if above == len(APERTURES):
        return f"{APERTURES[-1]:g} m or more"
    return f"{APERTURES[above - 1]:g} to {APERTURES[above]:g} m"


def _eras(epoch: NDArray[np.float64], word: str) -> list[str]:
    text = word.partition(":")[2]
    if not text:
        first = (np.floor(epoch / ERA_YEARS) * ERA_YEARS).astype(int).tolist()
        return [f"{year} to {year + ERA_YEARS}" for year in first]
    try:
        starts = sorted(float(year) for year in text.split("/"))
    except ValueError:
        raise InputError(
            f"{word!r} names no years; write the years in which eras begin, as era:1950/1980"
        ) from None
    names = [f"before {starts[0]:g}"]
    names += [f"{a:g} to {b:g}" for a, b in pairwise(starts)]
    names.append(f"from {starts[-1]:g}")
    return [names[slot] for slot in np.searchsorted(starts, epoch, side="right")]
