"""The table of measures: defaults, checks, selection."""

import dataclasses

import numpy as np
import pytest

from relorbit.errors import InputError, Undetermined
from relorbit.measures.table import Measures

GOOD = {"epoch": [1990.0, 1995.0, 2000.0], "theta": [10.0, 350.0, 90.0], "rho": [1.0, 1.5, 0.5]}


def refused(**changes):
    with pytest.raises(InputError) as caught:
        Measures.from_columns({**GOOD, **changes}, "list.csv", lines=[3, 5, 9])
    return str(caught.value)


def test_defaults_fill_what_is_not_given():
    measures = Measures.from_columns(GOOD)
    assert len(measures) == 3
    assert measures.technique.tolist() == ["unknown"] * 3
    assert measures.equinox.tolist() == ["J2000"] * 3
    assert measures.use.all() and not measures.flip.any()
    assert np.isnan(measures.weight).all() and np.isnan(measures.theta_err).all()


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"theta": [10.0, 361.25, 90.0]},
         "list.csv, line 5, column theta: 361.25 is outside [0, 360); give the position angle in "
         "degrees, from 0 up to but not including 360"),
        ({"theta": [10.0, 3.0, 360.0]},
         "list.csv, line 9, column theta: 360 is outside [0, 360); give the position angle in "
         "degrees, from 0 up to but not including 360"),
        ({"theta": [-0.5, 3.0, 30.0]},
         "list.csv, line 3, column theta: -0.5 is outside [0, 360); give the position angle in "
         "degrees, from 0 up to but not including 360"),
        ({"rho": [1.0, -0.25, 1.0]},
         "list.csv, line 5, column rho: -0.25 is negative; a separation is 0 or more"),
        ({"rho": [1.0, 1.0, np.inf]},
         "list.csv, line 9, column rho: inf is not a finite number"),
        ({"theta_err": [0.0, 1.0, 1.0]},
         "list.csv, line 3, column theta_err: 0 is not a standard deviation; give one above 0 or "
         "leave it out"),
        ({"rho_err": [1.0, -1.0, 1.0]},
         "list.csv, line 5, column rho_err: -1 is not a standard deviation; give one above 0 or "
         "leave it out"),
        ({"weight": [1.0, 0.0, -2.0]},
         "list.csv, line 9, column weight: -2 is negative; a weight is 0 or more"),
        ({"aperture_m": [0.0, 1.0, 1.0]},
         "list.csv, line 3, column aperture_m: 0 is not above 0; leave it out where unknown"),
        ({"epoch": [1599.9, 1990.0, 1990.0]},
         "list.csv, line 3, column epoch: 1599.9 is before 1600 or after 2200; correct it, or "
         "allow any epoch"),
        ({"epoch": [1990.0, 1990.0, 2200.5]},
         "list.csv, line 9, column epoch: 2200.5 is before 1600 or after 2200; correct it, or "
         "allow any epoch"),
        ({"epoch": [1990.0, None, 1990.0]},
         "list.csv, line 5: no epoch; every measure needs one"),
        ({"theta": [10.0, None, 9.0], "rho": [1.0, None, 1.0]},
         "list.csv, line 5: neither theta nor rho; a measure needs at least one of them"),
        ({"technique": ["plate", "telepathy", "plate"]},
         "list.csv, line 5, column technique: 'telepathy' is not a technique; use one of "
         "eyepiece, plate, camera, interferometer, space, unknown"),
        ({"equinox": ["date", "J2000", "often"]},
         "list.csv, line 9, column equinox: 'often' is not an equinox; use J2000, date, or a year "
         "such as 1950.0"),
        ({"use": [True, "perhaps", False]},
         "list.csv, line 5, column use: 'perhaps' is not yes or no; write True or False"),
        ({"note": ["a", "b\x07", "c"]},
         "list.csv, line 5, column note: 'b\\x07' holds a control character; take it out"),
        ({"rho": [1.0, "wide", 2.0]},
         "list.csv, line 5, column rho: 'wide' is not a number"),
        ({"rho": [1.0, 2.0]},
         "list.csv, column rho: 2 values where the epoch has 3; give every column one value for "
         "each measure"),
    ],
)  # fmt: skip
def test_a_bad_value_is_refused_with_its_place(changes, message):
    assert refused(**changes) == message


def test_the_first_bad_row_is_named_whatever_its_column():
    message = refused(theta=[10.0, 20.0, 400.0], rho=[-1.0, 1.0, 1.0])
    assert message.startswith("list.csv, line 3, column rho: -1")


def test_without_lines_the_row_is_named():
    with pytest.raises(InputError) as caught:
        Measures.from_columns({"epoch": [1990.0, 1991.0], "rho": [1.0, -1.0]})
    assert str(caught.value).startswith("row 2, column rho: -1 is negative")
    assert isinstance(caught.value, ValueError)


def test_any_epoch_when_allowed():
    measures = Measures.from_columns({"epoch": [-500.0], "rho": [1.0]}, allow_any_epoch=True)
    assert measures.epoch[0] == -500.0


def test_missing_is_none_masked_or_nan_and_never_a_number():
    columns = {
        "epoch": np.ma.array([1990.0, 1991.0, 1992.0]),
        "theta": np.ma.array([1.0, 2.0, 3.0], mask=[False, True, False]),
        "rho": [None, 1.0, np.nan],
    }
    measures = Measures.from_columns(columns)
    assert measures.has_theta.tolist() == [True, False, True]
    assert measures.has_rho.tolist() == [False, True, False]


def test_needed_columns_are_asked_for():
    with pytest.raises(InputError, match="no column for the epoch"):
        Measures.from_columns({"theta": [1.0]})
    with pytest.raises(InputError, match="no column for the position angle"):
        Measures.from_columns({"epoch": [1990.0]})
    with pytest.raises(TypeError, match="measures have no column colour; they have epoch, theta"):
        Measures.from_columns({**GOOD, "colour": [1, 2, 3]})


def test_flip_turns_the_effective_angle_only():
    measures = Measures.from_columns({**GOOD, "flip": [True, False, True]})
    assert measures.theta_effective.tolist() == [190.0, 350.0, 270.0]
    assert measures.theta.tolist() == [10.0, 350.0, 90.0]


def test_select_append_and_replace():
    measures = Measures.from_columns({**GOOD, "observer": ["A", "B", "Long name"]})
    part = measures.select(measures.theta < 100)
    assert part.observer.tolist() == ["A", "Long name"]
    both = part.append(measures)
    assert len(both) == 5 and both.observer[-1] == "Long name"
    assert len(measures.select([])) == 0
    other = dataclasses.replace(measures, use=[False, True, True])
    assert other.use.tolist() == [False, True, True] and measures.use.all()
    assert other != measures
    with pytest.raises(ValueError, match="column use has shape"):
        dataclasses.replace(measures, use=[False])


def test_columns_cannot_be_changed_in_place():
    given = np.array(GOOD["theta"])
    measures = Measures.from_columns({**GOOD, "theta": given})
    with pytest.raises(ValueError, match="read-only"):
        measures.theta[0] = 5.0
    given[0] = 77.0
    assert measures.theta[0] == 10.0


def test_errors_survive_the_way_back_from_another_process():
    import pickle

    error = pickle.loads(pickle.dumps(InputError("bad", path="a.csv", line=2, column="rho")))
    assert str(error) == "a.csv, line 2, column rho: bad"
    assert (error.path, error.line, error.column) == ("a.csv", 2, "rho")
    short = pickle.loads(pickle.dumps(Undetermined("too short", "short_arc", {"P_least": 50.0})))
    assert (short.reason, short.code, short.known) == ("too short", "short_arc", {"P_least": 50.0})
