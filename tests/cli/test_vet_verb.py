"""vet on the command line: found, put right, taken back; files that cannot be, and what is said."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

import relorbit

ROWS = (10, 30)


@pytest.fixture
def slipped(tarn):
    """Tarn 31 with a swapped quadrant (measure 11) and a rho ten times too large (31)."""
    pair = relorbit.read(tarn)
    m = pair.measures
    theta, rho = m.theta.copy(), m.rho.copy()
    theta[ROWS[0]] = (theta[ROWS[0]] + 180.0) % 360.0
    rho[ROWS[1]] *= 10.0
    pair.with_measures(replace(m, theta=theta, rho=rho)).write(tarn)
    return tarn


def refused(done) -> str:
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.count("\n") == 1
    return done.stderr


def told(done):
    assert (done.returncode, done.stderr) == (0, "")
    return " ".join(done.stdout.split())


def test_found_put_right_and_taken_back(run, slipped):
    before = slipped.read_bytes()
    text = told(run("vet", slipped))
    assert "2 of 60 measures look wrong" in text and "nothing is changed" in text
    assert "measure 11: the quadrant is swapped: flip" in text
    assert "measure 31: rho is 10 times too large: rho" in text
    assert slipped.read_bytes() == before, "nothing is changed without --apply"
    slips = relorbit.read(slipped)
    assert "put right in" in told(run("vet", slipped, "--apply"))
    right = relorbit.read(slipped).measures
    assert right.flip[ROWS[0]] and right.theta[ROWS[0]] == slips.measures.theta[ROWS[0]]
    assert right.rho_obs[ROWS[1]] == slips.measures.rho[ROWS[1]]
    assert right.rho[ROWS[1]] == pytest.approx(slips.measures.rho[ROWS[1]] / 10.0)
    assert right.reason[ROWS[0]] == "the quadrant is swapped"
    once = slipped.read_bytes()
    assert "no slip found" in told(run("vet", slipped, "--apply"))
    assert slipped.read_bytes() == once, "applied twice changes nothing"
    assert "2 measures put back as received" in told(run("vet", slipped, "--undo"))
    assert slipped.read_bytes() == before, "to the letter"
    assert "0 measures put back" in told(run("vet", slipped, "--undo"))


def test_some_measures_only(run, slipped):
    before = relorbit.read(slipped)
    told(run("vet", slipped, "--apply", "--measures", "11,12"))
    after = relorbit.read(slipped).measures
    assert after.flip[ROWS[0]] and after.rho[ROWS[1]] == before.measures.rho[ROWS[1]]
    told(run("vet", slipped, "--apply"))
    assert "1 measure put back" in told(run("vet", slipped, "--undo", "--measures", "31"))
    assert relorbit.read(slipped).measures == after


def test_json(run, slipped):
    done = run("vet", slipped, "--json")
    found = json.loads(done.stdout)
    assert (found["schema"], found["applied"]) == ("relorbit/findings/1", False)
    assert [(one["row"], one["kind"]) for one in found["findings"]] == [
        (ROWS[0], "quadrant"), (ROWS[1], "rho-factor"),
    ]  # fmt: skip
    assert found["findings"][0]["change"]["flip"] == {"before": False, "after": True}
    assert json.loads(run("vet", slipped, "--apply", "--json").stdout)["applied"] is True
    assert json.loads(run("vet", slipped, "--undo", "--json").stdout)["undone"] == 2


def test_against_an_orbit_on_record(run, slipped):
    assert run("solve", slipped, "--errors", "from-residuals", "--record", "a").returncode == 0
    assert "2 of 60 measures look wrong" in told(run("vet", slipped, "--orbit", "a"))
    assert "no orbit 'b'" in refused(run("vet", slipped, "--orbit", "b"))


def test_undo_after_an_edit_by_hand(run, slipped):
    told(run("vet", slipped, "--apply"))
    pair = relorbit.read(slipped)
    m = pair.measures
    rho = m.rho.copy()
    rho[ROWS[1]] += 0.001
    pair.with_measures(replace(m, rho=rho)).write(slipped)
    text = told(run("vet", slipped, "--undo"))
    assert "2 measures put back" in text
    assert "measure 31: rho is" in text and "it was edited since and stays" in text
    back = relorbit.read(slipped).measures
    assert back.rho[ROWS[1]] == rho[ROWS[1]] and not back.flip.any()


def test_the_same_list_taken_in_again_adds_nothing(run, slipped, tmp_path):
    """What was corrected is still known for what it was when its list comes again."""
    pair = relorbit.read(slipped)
    m = pair.measures
    epoch = m.epoch.copy()
    epoch[40] += 10.0
    pair = pair.with_measures(replace(m, epoch=epoch))
    pair.write(slipped)
    (tmp_path / "again.ecsv").write_bytes(slipped.read_bytes())
    told(run("vet", slipped, "--apply"))
    done = run("intake", tmp_path / "again.ecsv", "--into", slipped)
    assert done.returncode == 0, done.stderr
    assert len(relorbit.read(slipped).measures) == len(m)


def test_no_slip(run, tarn):
    before = tarn.read_bytes()
    assert told(run("vet", tarn, "--apply")) == "Tarn 31: no slip found in 60 measures"
    assert tarn.read_bytes() == before


def test_bad_input(run, slipped, tmp_path):
    assert "there is no measure 61; the pair has 60" in refused(
        run("vet", slipped, "--measures", "61")
    )
    assert "'x' is not a number" in refused(run("vet", slipped, "--measures", "1,x"))
    assert "no such file" in refused(run("vet", "nowhere.ecsv"))
    assert "not allowed with" in refused(run("vet", slipped, "--apply", "--undo"))
    (tmp_path / "empty.csv").write_text("")
    assert "the file is empty" in refused(run("vet", "empty.csv"))
    (tmp_path / "nan.csv").write_text("epoch,theta,rho\n2000,nan,nan\n")
    assert "line 2" in refused(run("vet", "nan.csv"))
    plain = tmp_path / "plain.csv"
    plain.write_text("epoch,theta,rho\n2000,10,1\n")
    assert told(run("vet", plain)) == "plain: no slip found in 1 measure"
    assert "is a plain list, which would lose" in refused(run("vet", plain, "--apply"))
    assert "is a plain list, which would lose" in refused(run("vet", plain, "--undo"))
    slipped.chmod(0o444)
    before = slipped.read_bytes()
    assert "the file is read-only" in refused(run("vet", slipped, "--apply"))
    assert slipped.read_bytes() == before
    header = relorbit.Pair("none", relorbit.read(plain).measures.select(np.zeros(0, dtype=int)))
    header.write(tmp_path / "header.ecsv")
    assert told(run("vet", "header.ecsv", "--apply")) == "none: no slip found in 0 measures"
