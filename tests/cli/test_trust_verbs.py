"""judge, errors from residuals, and the look for a companion, on the command line."""

from __future__ import annotations

import json

import pytest
from command import EXAMPLES

import relorbit

NEW = "2026.5,154.9,1.28,0.5,0.01"
SWAPPED = "2027.5,341.6,1.22,0.5,0.01"


@pytest.fixture
def recorded(run, tarn):
    assert run("solve", tarn, "--record", "first").returncode == 0
    return tarn


def refused(done) -> str:
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr.count("\n") == 1
    return done.stderr


def test_judge_values(run, recorded):
    before = recorded.read_bytes()
    done = run("judge", recorded, "--measure", NEW, "--measure", SWAPPED)
    assert (done.returncode, done.stderr) == (0, "")
    assert "looks wrong: the quadrant" in " ".join(done.stdout.split())
    for words in ("predicted", "influence of each new measure", "reduced chi2 of each orbit",
                  "refitted", "last 30 years", "mass"):  # fmt: skip
        assert words in done.stdout
    assert recorded.read_bytes() == before, "nothing is written"
    found = json.loads(run("judge", recorded, "--measure", NEW, "--json").stdout)
    assert found["schema"] == "relorbit/judgement/1"
    assert found["verdict"] == "agrees"
    assert found["orbit"] == "first"
    assert len(found["ephemeris_old"]) == len(found["ephemeris_new"]) == 10
    assert {change["name"] for change in found["changes"]} >= {"P", "a", "mass"}


def test_judge_a_list_of_date(run, recorded, tmp_path):
    """theta of a list is of date, as for intake, and is brought to J2000 before it is judged."""
    (tmp_path / "new.csv").write_text("epoch,theta,rho,theta_err,rho_err\n" + NEW + "\n")
    given, plain = (
        json.loads(run("judge", recorded, "new.csv", "--json", *more).stdout)["measures"][0]
        for more in ((), ("--equinox", "J2000"))
    )
    assert plain["theta"] == 154.9
    assert 0.01 < abs(given["theta"] - 154.9) < 0.5
    m = relorbit.read(recorded).measures
    again = ",".join(f"{x}" for x in (m.epoch[3], m.theta[3], m.rho[3]))
    assert "already in the list, measure 4" in run("judge", recorded, "--measure", again).stdout


def test_judge_refuses(run, recorded):
    assert "no new measure is given" in refused(run("judge", recorded))
    word = refused(run("judge", recorded, "--measure", "2026,x,1"))
    assert "'x' is not a number for theta" in word
    assert "has 2 values" in refused(run("judge", recorded, "--measure", "2026,3"))
    assert "400 is outside" in refused(run("judge", recorded, "--measure", "2026,400,1"))
    assert "no orbit 'best'" in refused(
        run("judge", recorded, "--measure", NEW, "--orbit", "best")
    )


def test_solve_with_errors_from_residuals(run, tarn):
    done = run("solve", tarn, "--errors", "from-residuals")
    assert (done.returncode, done.stderr) == (0, "")
    assert "noise: errors of each group" in done.stdout
    assert "eyepiece, P. Quennel" in done.stdout
    told = json.loads(run("solve", tarn, "--group-by", "technique", "--json").stdout)
    assert [group["name"] for group in told["noise"]] == ["camera", "eyepiece", "plate"]
    assert sum(group["share"] for group in told["noise"]) == pytest.approx(1.0)
    given = json.loads(run("solve", tarn, "--errors", "as-given", "--json").stdout)
    assert given["noise"] == []
    offsets = run("solve", tarn, "--group-by", "technique", "--offsets", "plate").stdout
    assert "theta offset" in offsets and "+/-" in offsets


def test_groups_that_do_not_exist(run, tarn):
    assert "no group is called 'nobody'; the groups are" in refused(
        run("solve", tarn, "--offsets", "nobody")
    )
    assert "cannot be grouped by 'moon'" in refused(run("solve", tarn, "--group-by", "moon"))
    assert "ask for those" in refused(
        run("solve", tarn, "--errors", "as-given", "--group-by", "era")
    )


def test_companion(run, tarn):
    done = run("residuals", tarn, "--companion", "--permutations", "199")
    assert (done.returncode, done.stderr) == (0, "")
    assert "nothing: the best period" in done.stdout
    told = json.loads(
        run("residuals", tarn, "--companion", "--companion-periods", "3:20", "--json").stdout
    )
    assert told["schema"] == "relorbit/companion/1" and told["found"] is False
    assert max(told["periodogram"]["period"]) == pytest.approx(20.0)
    assert "cannot show" in refused(run("residuals", tarn, "--companion", "--permutations", "50"))


@pytest.mark.parametrize("figure", ["weights", "periodogram"])
def test_figures(run, tmp_path, figure):
    for name in ("tarn_31", "moss_144"):
        done = run("draw", EXAMPLES / f"{name}.ecsv", "--figure", figure, "--out", f"{name}.png")
        assert (done.returncode, done.stderr) == (0, "")
        assert (tmp_path / f"{name}.png").read_bytes().startswith(b"\x89PNG")


def test_errors_come_from_the_residuals_unless_said_otherwise(run, tarn):
    plain, asked, given = (
        json.loads(run("solve", tarn, "--json", *more).stdout)
        for more in ((), ("--errors", "from-residuals"), ("--errors", "as-given"))
    )
    assert plain == asked and plain["noise"] and not given["noise"]
    assert plain["elements"] != given["elements"]
    assert "--errors as-given" in run("solve", "--help").stdout


def test_a_list_too_short_for_errors_is_solved_and_says_so(run, tmp_path):
    (tmp_path / "few.csv").write_text(
        "epoch,theta,rho\n1950,10,1.00\n1965,80,0.9\n1980,150,1.05\n1995,240,0.95\n2010,300,1.0\n"
    )
    done = run("solve", "few.csv")
    assert (done.returncode, done.stderr) == (0, "")
    told = " ".join(done.stdout.split())
    assert "3 degrees of freedom are too few to tell errors from residuals" in told
    assert "too few to tell" not in run("solve", "few.csv", "--errors", "as-given").stdout


def test_small_groups_are_named(run):
    told = " ".join(run("solve", EXAMPLES / "quill_8.ecsv").stdout.split())
    assert "fewer than 6 measures do not tell the errors of a group: those of plate, Marlock Hill" \
        in told  # fmt: skip


def test_strips_show_the_list_before_and_after(run, tmp_path, tarn):
    pair = relorbit.read(tarn)
    from relorbit.measures.editing import with_flip, with_use

    with_use(with_flip(pair, [3]), [7], False, "clouds").write(tarn)
    done = run("draw", tarn, "--figure", "strips", "--out", "strips.png")
    assert (done.returncode, done.stderr) == (0, "")
    assert (tmp_path / "strips.png").read_bytes().startswith(b"\x89PNG")
