"""Rows from a spreadsheet or a mail, with a header line and without."""

from __future__ import annotations

import numpy as np
import pytest

from relorbit.desk.pasting import read_pasted
from relorbit.errors import InputError

NAN = np.nan
VISIBLE = ("epoch", "theta", "rho", "technique", "observer", "note", "theta_err")


@pytest.mark.parametrize(
    "text",
    [
        "1990.5 10.5 1.25\n1991.5 12 1.3",
        "1990.5\t10.5\t1.25\r\n1991.5\t12\t1.3\r\n",
        "1990,5\t10,5\t1,25\n1991,5\t12\t1,3\n",
        "1990,5  10,5  1,25\n1991,5  12  1,3\n",
        "1990.5, 10.5, 1.25\n1991.5, 12, 1.3",
        "1990.5,10.5,1.25\n1991.5,12,1.3",
        "1990,5;10,5;1,25\n1991,5;12;1,3",
        "| 1990.5 | 10.5 | 1.25 |\n| 1991.5 | 12 | 1.3 |",
        "> 1990.5 10.5 1.25\n> 1991.5 12 1.3\n>\n",
        ">> 1990.5 10.5 1.25\n>> 1991.5 12 1.3\n",
        "\n\n  1990.5 10.5° 1.25\"\n\n  1991.5 12° 1.3\"\n\n",
        "date PA sep\n1990.5 10.5 1.25\n1991.5 12 1.3",
        "# epoch rho theta\n1990.5 1.25 10.5\n1991.5 1.3 12",
        "Epoch\tSep (mas)\tPA (deg)\n1990.5\t1250\t10.5\n1991.5\t1300\t12\n",
    ],
)  # fmt: skip
def test_the_same_two_measures(text):
    m = read_pasted(text).measures
    assert m.epoch.tolist() == [1990.5, 1991.5]
    assert m.theta.tolist() == [10.5, 12.0]
    np.testing.assert_allclose(m.rho, [1.25, 1.3], rtol=1e-14)
    assert set(m.equinox) == {"date"}


def test_errors_follow_and_what_is_missing():
    intake = read_pasted("1990.5 10.5 1.25 0.5 0.01\n1991.5 - 1.3 - 0.02\n", equinox="J2000")
    m = intake.measures
    np.testing.assert_array_equal(m.theta, [10.5, NAN])
    np.testing.assert_array_equal(m.theta_err, [0.5, NAN])
    np.testing.assert_array_equal(m.rho_err, [0.01, 0.02])
    assert set(m.equinox) == {"J2000"} and intake.lines.tolist() == [1, 2]


def test_all_five_between_bars():
    m = read_pasted("| 1990.5 | 10.5 | 1.25 | 0.5 | 0.01 |\n").measures
    assert (m.rho[0], m.theta_err[0], m.rho_err[0]) == (1.25, 0.5, 0.01)


def test_dates():
    m = read_pasted("2020-07-02 10.5 1.25\n").measures
    # JD 2459032.5, of which J2000.0 is 2451545.0; a day is 0.0027 yr
    assert m.epoch[0] == pytest.approx(2000 + 7487.5 / 365.25, abs=1e-5)
    assert m.epoch_obs[0] == "2020-07-02"


def test_tabs_in_the_order_of_the_table():
    row = "1990.5\t10.5\t1.25\tcamera\tLark\ta note\t0.5\n"
    m = read_pasted(row, VISIBLE).measures
    assert (m.technique[0], m.observer[0], m.note[0], m.theta_err[0]) == (
        "camera", "Lark", "a note", 0.5,
    )  # fmt: skip
    shorter = read_pasted("1990.5\t10.5\t1.25\tcamera\tLark\tx\n", VISIBLE).measures
    assert shorter.note[0] == "x"
    turned = read_pasted("1.25\t10.5\t1990.5\n", ("rho", "theta", "epoch")).measures
    assert (turned.rho[0], turned.epoch[0]) == (1.25, 1990.5)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "nothing to take in; copy rows with epoch, theta and rho"),
        ("  \n\t\n# only a remark\n", "nothing to take in"),
        ("Dear all,\n1990.5 10.5 1.25\n", "line 1: no column for the epoch"),
        ("\n\n1990.5 10.5 wide\n", "line 3, column rho: 'wide' is not a number"),
        ("1990.5 10.5 1.25\n1991.5 400 1.3\n", "line 2, column theta: 400 is outside"),
        ("1990.5 10.5 1.25\n1991.5 12\n", "line 2: 2 values where the first row has 3; write -"),
        ("1990.5 10.5 1.25\n1991.5\n", "line 2: 1 value where the first row has 3; write -"),
        ("1990.5 10.5 1.25\n\n1991.5 12 1.3 0.5\n", "line 3: 4 values where the first row has 3"),
        ("1990.5 10 1 .5 .01 7\n", "line 1: 6 values in a row and no header line"),
        ("1990.5\n", "line 1: no column for the position angle"),
        ("epoch theta rho\n", "line 1: a header but no measures"),
        ("1500.5 10.5 1.25\n", "line 1, column epoch: 1500.5 is before 1600"),
        ('1990.5\t10.5\t"1.25\n', "line 1: a quotation mark is opened and never closed"),
        ("epoch theta rho rho\n1990.5 10 1 1\n", "line 1, column rho: means rho"),
        ("https://example.org/a?b=c", "line 1: a header but no measures"),
        ("\x00\x01\x02", "line 1: a header but no measures"),
        ("12 34\x07 56", "line 1"),
    ],
)
def test_garbage_names_its_line(text, words):
    with pytest.raises(InputError) as caught:
        read_pasted(text, VISIBLE)
    place = "pasted text, " if words.startswith("line") else "pasted text: "
    assert str(caught.value).startswith(place + words)


def test_random_garbage_is_read_or_refused():
    rng = np.random.default_rng(20261201)
    alphabet = np.array(list("0123456789.,;|\t \n\n\"'#->°abEθ\x00\r%ECSV{}:[]"))
    read = refused = 0
    for _ in range(3000):
        text = "".join(rng.choice(alphabet, rng.integers(1, 60)))
        try:
            assert len(read_pasted(text, VISIBLE).measures) >= 0
            read += 1
        except InputError as error:
            assert error.path == "pasted text"
            refused += 1
    assert refused > 2000


def test_a_whole_pair_file_can_be_pasted():
    from desks import pair

    from relorbit.measures.store import pair_text

    assert read_pasted(pair_text(pair())).measures == pair().measures
