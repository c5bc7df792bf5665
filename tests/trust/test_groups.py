"""Groups of measures by technique, observer, aperture and era."""

import pytest

from relorbit.errors import InputError
from relorbit.measures.table import Measures
from relorbit.solve.groups import chosen_groups, group_names

M = Measures.from_columns({
    "epoch": [1949.9, 1951.0, 1999.0, 2003.0], "theta": [1.0, 2.0, 3.0, 4.0], "rho": [1.0] * 4,
    "technique": ["eyepiece", "eyepiece", "camera", "camera"],
    "observer": ["Alder", "", "Birch", "Birch"], "aperture_m": [0.15, 0.5, None, 3.6],
})  # fmt: skip


def test_technique_and_observer_by_default():
    names, parents = group_names(M)
    assert names.tolist() == [
        "eyepiece, Alder", "eyepiece, anyone", "camera, Birch", "camera, Birch",
    ]  # fmt: skip
    assert parents.tolist() == ["eyepiece", "eyepiece", "camera", "camera"]


def test_by_aperture_and_era():
    assert group_names(M, "aperture")[0].tolist() == [
        "below 0.2 m", "0.5 to 1 m", "aperture unknown", "2.5 m or more",
    ]  # fmt: skip
    assert group_names(M, ["era"])[0].tolist() == [
        "1925 to 1950", "1950 to 1975", "1975 to 2000", "2000 to 2025",
    ]  # fmt: skip
    names, parents = group_names(M, "technique,era:1950/2000")
    assert names.tolist() == [
        "eyepiece, before 1950", "eyepiece, 1950 to 2000", "camera, 1950 to 2000",
        "camera, from 2000",
    ]  # fmt: skip
    assert parents.tolist() == M.technique.tolist()
    assert set(group_names(M, "observer")[1].tolist()) == {"all"}
    assert set(group_names(M, "none")[0].tolist()) == {"all"}


def test_what_does_not_exist_is_refused_by_name():
    with pytest.raises(InputError, match="cannot be grouped by 'moon'; group them by technique"):
        group_names(M, "technique,moon")
    with pytest.raises(InputError, match="names no years"):
        group_names(M, "era:old")
    with pytest.raises(InputError, match="no group is called 'Ash'; the groups are: Alder; Birch"):
        chosen_groups(["Ash"], ["Birch", "Alder"])
    assert chosen_groups("all", ["Birch", "Alder", "Birch"]) == ("Alder", "Birch")
