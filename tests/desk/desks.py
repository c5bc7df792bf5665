"""Invented pairs, and desks without a window, for the tests of this folder."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from relorbit.desk.model import DeskModel
from relorbit.desk.session import Session
from relorbit.desk.settings import Settings
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements

EXAMPLE_FOLDER = Path(__file__).parents[2] / "example_measures"
# made up, as are the measures
ORBIT = Elements(P=62.4, T=1978.31, e=0.42, a=1.85, i=52.0, node=71.0, omega=214.0)
OTHER_ORBIT = Elements(P=31.0, T=1980.0, e=0.2, a=1.8, i=40.0, node=70.0, omega=200.0)


def pair(count: int = 6, name: str = "Invented 1", **who: object) -> Pair:
    """A pair with made-up measures, five columns filled and a note on every one."""
    rng = np.random.default_rng(count)
    epoch = np.round(np.sort(rng.uniform(1900, 2020, count)), 3)
    theta, rho = np.round(rng.uniform(0, 359, count), 2), np.round(rng.uniform(0.5, 3, count), 3)
    techniques = ["eyepiece", "plate", "camera"] * count
    return Pair.from_arrays(
        epoch, theta, rho, np.full(count, 0.5), np.full(count, 0.02),
        technique=techniques[:count], observer="Finch", name=name,
        note=[f"night {k}, second list" for k in range(count)], **who,
    )  # fmt: skip


def pair_file(folder: Path, count: int = 6, **who: object) -> Path:
    """A pair file in `folder`."""
    path = folder / "invented_1.ecsv"
    pair(count, **who).write(path)
    return path


def new_session(folder: Path) -> Session:
    """A session with an empty desk, whose settings are kept in `folder`/config."""
    return Session(DeskModel(), Settings(folder / "config"))
