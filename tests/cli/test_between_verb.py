"""`relorbit between` as an observer runs it; the stars are invented."""

from __future__ import annotations

import json

import pytest

import relorbit

A = "ra=15 26 12.0 dec=+41 13 12.0 epoch=2016.0 ra_err=0.03 dec_err=0.03 pm_ra=212 pm_dec=-164"
B = "ra=231.549600 dec=41.219664 epoch=2016.0 ra_err=0.05 dec_err=0.04 pm_ra=202 pm_dec=-160"
STARS = """name,ra,dec,ra_err,dec_err,epoch,pm_ra,pm_dec,pm_ra_err,pm_dec_err
Tarn 31 A,15 26 12.0,41 13 12.0,0.03,0.03,2016.0,212,-164,0.03,0.04
Tarn 31 B,231.549600,41.219664,0.05,0.04,2016.0,202,-160,0.06,0.05
"""


@pytest.fixture
def stars(tmp_path):
    (tmp_path / "stars.csv").write_text(STARS)
    return tmp_path / "stars.csv"


def refused(done) -> str:
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.count("\n") == 1
    return done.stderr


def test_the_measure_is_printed_with_its_errors(run, stars):
    done = run("between", stars)
    assert (done.returncode, done.stderr) == (0, "")
    assert "Tarn 31 A and Tarn 31 B" in done.stdout and done.stdout.isascii()
    # by hand: errors east 0.0583 mas and north 0.05 mas, turned by theta
    assert done.stdout.splitlines()[-1].split() == [
        "2016.000", "2016-01-01", "221.8433", "0.0019", "1.623682", "0.000054", "+0.15",
    ]  # fmt: skip
    told = json.loads(run("between", A, B, "--json").stdout)
    assert told["schema"] == "relorbit/between/1"
    assert told["theta"] == pytest.approx(221.8433, abs=1e-4) and told["added_to"] is None
    plain = relorbit.between(
        {"ra": "15 26 12.0", "dec": "+41 13 12.0", "epoch": 2016.0},
        relorbit.Place(231.5496, 41.219664, 2016.0),
    )
    assert (plain.theta, plain.rho) == pytest.approx((told["theta"], told["rho"]))


def test_a_measure_is_appended_once(run, stars, tarn):
    before = relorbit.read(tarn).measures
    done = run("between", stars, "--epoch", "2020", "--add-to", tarn, "--observer", "Catalogue 3")
    assert (done.returncode, done.stderr) == (0, "")
    assert "measure 61, technique space" in done.stdout and "lower limits" not in done.stdout
    after = relorbit.read(tarn).measures
    assert after.select(range(60)) == before
    assert (after.technique[60], after.observer[60]) == ("space", "Catalogue 3")
    assert after.epoch[60] == 2020.0 and 0.0 < after.theta_err[60] < 0.02
    assert after.theta_obs[60] - after.theta[60] == pytest.approx(0.00103, abs=1e-5)
    assert (tarn.parent / f"{tarn.name}.previous").exists()
    kept = tarn.read_bytes()
    again = refused(run("between", stars, "--epoch", "2020", "--add-to", tarn,
                        "--observer", "Catalogue 3"))  # fmt: skip
    assert "Catalogue 3 of 2020.000 already (measure 61)" in again
    assert tarn.read_bytes() == kept
    other = run("between", stars, "--epoch", "2020", "--add-to", tarn, "--json")
    assert json.loads(other.stdout)["added_to"]["notes"][-1] == (
        "of that epoch the list also holds measure 61"
    )


def test_a_place_far_from_the_pair_is_said(run, tarn):
    far = run("between", A.replace("41 13", "41 23"), B.replace("41.21", "41.38"),
              "--add-to", tarn)  # fmt: skip
    assert far.returncode == 0
    assert "arcsec from the place of Tarn 31 in the file" in far.stdout


def test_what_is_wrong_is_said_in_one_line(run, stars, tarn, tmp_path):
    before = tarn.read_bytes()
    assert "at the same place" in refused(run("between", A, A, "--add-to", tarn))
    assert "give B too, or a file of two rows" in refused(run("between", A))
    assert "holds 2 stars where one belongs" in refused(run("between", stars, B))
    still = B.replace(" pm_ra=202 pm_dec=-160", "")
    assert "B has no proper motion" in refused(run("between", A, still, "--epoch", "2010"))
    assert "B: 'x' is not WORD=VALUE" in refused(run("between", A, "x dec=3"))
    assert "give --add-to too" in refused(run("between", A, B, "--observer", "me"))
    (tmp_path / "plain.csv").write_text("epoch,theta,rho\n2000,10,1\n")
    assert "is a plain list" in refused(run("between", A, B, "--add-to", "plain.csv"))
    assert "no such file" in refused(run("between", A, B, "--add-to", "none.ecsv"))
    assert tarn.read_bytes() == before
