"""Each verb does its part of the job on the examples."""

from __future__ import annotations

import json
import math
import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest
from command import COMMAND, EXAMPLES

import relorbit

# what the examples were made from, as their README says: P, T, e, a, i, node, omega
MADE_FROM = {
    "tarn_31": (62.4, 1978.31, 0.42, 1.85, 52.0, 71.0, 214.0),
    "quill_8": (148.0, 1957.9, 0.905, 1.32, 117.0, 22.0, 281.0),
    "moss_144": (33.2, 1991.6, 0.35, 0.62, 88.6, 134.0, 96.0),
    "lantern_5": (21.7, 1999.2, 0.02, 0.48, 171.0, 48.0, 130.0),
}


def test_version_and_help_need_no_file(run):
    assert run("--version").stdout == f"relorbit {relorbit.__version__}\n"
    shown = run("--help").stdout
    for verb in ("intake", "solve", "ephemeris", "residuals", "weigh", "draw", "demo"):
        assert verb in shown
        told = run(verb, "--help")
        assert told.returncode == 0
        assert f"relorbit {verb} " in told.stdout or f"relorbit {verb}\n" in told.stdout
        assert "example:" in told.stdout
    assert "Sun" in shown


@pytest.mark.parametrize("name", MADE_FROM)
def test_solve_finds_what_the_example_was_made_from(run, name):
    done = run("solve", EXAMPLES / f"{name}.ecsv", "--json")
    assert done.returncode == 0, done.stderr
    assert done.stderr == ""
    found = json.loads(done.stdout)
    assert found["schema"] == "relorbit/solution/1"
    truth = dict(zip(("P", "T", "e", "a", "i", "node", "omega"), MADE_FROM[name], strict=True))
    turns = round((found["elements"]["T"] - truth["T"]) / truth["P"])
    truth["T"] += turns * truth["P"]
    for element, value in truth.items():
        gap = found["elements"][element] - value
        if element == "T":
            # the error of P comes in with every turn between the two passages
            sigma = math.hypot(found["sigma"]["T"], turns * found["sigma"]["P"])
        else:
            sigma = found["sigma"][element]
        assert abs(gap) < 4.0 * sigma, (element, gap, sigma)


def test_json_of_solve_has_the_fixed_keys(run, tarn):
    found = json.loads(run("solve", tarn, "--json").stdout)
    for key in (
        "schema", "pair", "measures", "used", "chi2", "dof", "elements", "sigma",
        "thiele_innes", "covariance", "mass_total", "alternatives", "warnings",
    ):  # fmt: skip
        assert key in found
    assert set(found["elements"]) == set(found["sigma"]) == set(found["covariance"]["order"])
    assert set(found["thiele_innes"]) == {"A", "B", "F", "G"}
    assert set(found["mass_total"]) == {"value", "sigma"}
    assert np.shape(found["covariance"]["matrix"]) == (7, 7)
    sigma = [found["sigma"][name] for name in found["covariance"]["order"]]
    assert np.sqrt(np.diag(found["covariance"]["matrix"])) == pytest.approx(sigma)


def test_a_plain_list_works_wherever_a_pair_does(run, tmp_path):
    pair = relorbit.read(EXAMPLES / "tarn_31.ecsv")
    m = pair.measures
    plain = tmp_path / "plain.csv"
    keep = np.isfinite(m.theta_err)
    rows = zip(*(c[keep] for c in (m.epoch, m.theta, m.rho, m.theta_err, m.rho_err)), strict=True)
    plain.write_text(
        "epoch,theta,rho,theta_err,rho_err\n"
        + "".join(f"{a},{b},{c},{d},{e}\n" for a, b, c, d, e in rows)
    )
    for verb in ("solve", "ephemeris", "residuals"):
        done = run(verb, plain)
        assert (done.returncode, done.stderr) == (0, "")
    drawn = run("draw", plain, "--out", "plain.png")
    assert (drawn.returncode, drawn.stderr) == (0, "")
    refused = run("solve", plain, "--record", "mine")
    assert refused.returncode == 2
    assert "is a plain list" in refused.stderr
    assert plain.read_text().startswith("epoch,theta")


def test_held_elements(run, tarn):
    found = json.loads(run("solve", tarn, "--hold", "e=0.4", "--hold", "P=62.4", "--json").stdout)
    assert found["elements"]["e"] == 0.4
    assert found["elements"]["P"] == pytest.approx(62.4, rel=1e-12)
    assert found["sigma"]["e"] is None and found["sigma"]["P"] is None
    assert found["held"] == {"e": 0.4, "P": 62.4}


def test_record_then_ephemeris_residuals_and_mass_use_it(run, tarn):
    done = run("solve", tarn, "--record", "first", "--note", "by hand", "--json")
    solution = json.loads(done.stdout)
    kept = relorbit.read(tarn).orbit("first")
    assert kept.note == "by hand"
    assert kept.elements.to_dict() == pytest.approx(solution["elements"])
    assert (tarn.parent / "tarn_31.ecsv.previous").exists()
    rows = json.loads(run("ephemeris", tarn, "--from", "2027", "--to", "2030", "--json").stdout)
    assert rows["schema"] == "relorbit/ephemeris/1"
    assert [row["epoch"] for row in rows["rows"]] == [2027, 2028, 2029, 2030]
    fresh = json.loads(
        run("ephemeris", tarn, "--fresh", "--from", "2027", "--to", "2030", "--json").stdout
    )
    for old, new in zip(rows["rows"], fresh["rows"], strict=True):
        assert old == pytest.approx(new)
    assert set(rows["rows"][0]) == {"epoch", "theta", "rho", "theta_sigma", "rho_sigma"}
    residuals = json.loads(run("residuals", tarn, "--json").stdout)["rows"]
    assert len(residuals) == solution["measures"]
    weighed = json.loads(run("weigh", tarn, "--json").stdout)
    assert weighed["mass_total"]["value"] == pytest.approx(solution["mass_total"]["value"])
    assert weighed["mass_total"]["sigma"] == pytest.approx(solution["mass_total"]["sigma"])
    assert sum(source["share"] for source in weighed["sources"]) == pytest.approx(1.0)


def test_ephemeris_of_bare_elements_and_dates(run):
    # Meeus, Astronomical Algorithms, ch. 57: eta Coronae Borealis at 1980.0
    done = run(
        "ephemeris", "--json", "--at", "1980.0,1980-01-01", "--elements",
        "P=41.623,T=1934.008,e=0.2763,a=0.907,i=59.025,node=23.717,omega=219.907",
    )  # fmt: skip
    first, second = json.loads(done.stdout)["rows"]
    assert first["theta"] == pytest.approx(318.4243, abs=5e-5)
    assert first["rho"] == pytest.approx(0.41102, abs=5e-6)
    assert first["theta_sigma"] is None
    # Julian epoch 1980.0 is 1980 January 1.0 TT less 0.0014 yr or so
    assert second["epoch"] == pytest.approx(1980.0, abs=0.003)


@pytest.mark.parametrize(
    ("step", "count"), [("1y", 3), ("6 months", 5), ("0.5", 5), ("100 days", 8)]
)
def test_ephemeris_steps(run, tarn, step, count):
    done = run("ephemeris", tarn, "--from", "2027", "--to", "2029", "--step", step, "--json")
    assert len(json.loads(done.stdout)["rows"]) == count


def test_weigh_with_another_parallax_and_a_mass_ratio(run, tarn):
    done = run("weigh", tarn, "--parallax", "95", "--mass-ratio", "0.5", "--json")
    found = json.loads(done.stdout)
    total = found["mass_total"]["value"]
    assert found["component_masses"] == pytest.approx([total / 1.5, total / 3.0])
    assert found["sigma_parallax"] is None
    table = run("weigh", tarn, "--mass-ratio", "0.5").stdout
    for word in ("semimajor axis", "period", "correlation", "parallax"):
        assert word in table


def test_intake_of_a_messy_list_reports_and_reduces(run, tmp_path):
    mail = EXAMPLES / "slate_19_mail.txt"
    words = ("intake", mail, "--layout", EXAMPLES / "slate_19_mail.toml", "--into", "slate.ecsv")
    words = (*words, "--ra", "03 12 05", "--dec", "-22:10:00", "--name", "Slate 19")
    done = run(*words)
    assert done.returncode == 0, done.stderr
    assert "30 measures read, 28 new" in done.stdout
    assert "line 27: repeats line 25" in done.stdout
    pair = relorbit.read(tmp_path / "slate.ecsv")
    assert pair.dec_deg == pytest.approx(-(22 + 10 / 60))
    assert set(pair.measures.equinox) == {"J2000"}
    assert np.isfinite(pair.measures.theta_obs).all()
    again = json.loads(run(*words, "--json").stdout)
    assert again["measures"] == 28
    assert again["lists"][0]["appended"] == 0
    assert len(again["lists"][0]["doubled"]) == 30
    # the demonstrations of a slip in the list are seen by solve, which says so
    told = run("solve", "slate.ecsv").stdout
    assert "look for slips" in told


def test_nothing_is_written_unless_every_list_is_read(run, tmp_path):
    bad = tmp_path / "bad.csv"
    bad.write_text("epoch,theta,rho\n2001.5,12,x\n")
    done = run("intake", EXAMPLES / "tarn_31.csv", bad, "--into", "new.ecsv")
    assert done.returncode == 2
    assert not (tmp_path / "new.ecsv").exists()


@pytest.mark.parametrize("figure", ["orbit", "time", "residuals", "sheet"])
@pytest.mark.parametrize(
    ("suffix", "start"), [("png", b"\x89PNG"), ("pdf", b"%PDF"), ("svg", b"<?xml")]
)
def test_draw_writes_each_figure_in_each_format(run, tarn, tmp_path, figure, suffix, start):
    done = run("draw", tarn, "--figure", figure, "--out", f"drawn.{suffix}", "--years", "5")
    assert (done.returncode, done.stderr) == (0, "")
    assert (tmp_path / f"drawn.{suffix}").read_bytes().startswith(start)


def test_demo_does_the_whole_job(run, tmp_path):
    done = run("demo")
    assert done.returncode == 0, done.stderr
    made = {path.name for path in (tmp_path / "relorbit_demo").iterdir()}
    assert made >= {
        "tarn_31.ecsv", "solution.txt", "ephemeris.txt", "residuals.txt", "mass.txt",
        "orbit.png", "time.png", "residuals.png", "sheet.pdf",
    }  # fmt: skip
    for name in made:
        assert name in done.stdout
    assert "invented" in done.stdout
    assert run("demo").returncode == 0, "a second demo into the same folder"


def test_an_orbit_that_is_not_determined_is_status_3(run, tarn, tmp_path):
    done = run("solve", EXAMPLES / "heron_77.ecsv", "--epoch-range", "1990:2030")
    assert done.returncode == 3
    assert done.stdout == ""
    assert done.stderr.count("\n") == 1
    assert "period" in done.stderr and "longer than about" in done.stderr
    told = run("solve", EXAMPLES / "heron_77.ecsv", "--epoch-range", "1990:2030", "--json")
    known = json.loads(told.stdout)
    assert told.returncode == 3
    assert known["schema"] == "relorbit/undetermined/1"
    assert 33.0 < known["known"]["P_lower_limit"] < 310.0


def test_no_progress_in_a_pipe_and_the_same_output_twice(run, tarn):
    first, second = run("solve", tarn), run("solve", tarn)
    assert first.stdout == second.stdout
    assert first.stderr == second.stderr == ""


def test_a_reader_that_goes_away_is_no_fault(run, tarn, tmp_path):
    shell = shutil.which("sh")
    if shell is None:
        pytest.skip("no shell to make a pipe with")
    done = subprocess.run(
        [shell, "-c", f'"{COMMAND}" residuals "{tarn}" | head -n 1'],
        capture_output=True, text=True, cwd=tmp_path, timeout=120,
    )  # fmt: skip
    assert done.returncode == 0
    assert done.stderr == ""


def test_the_house_of_python_names():
    assert pytest.approx(
        62.4, abs=0.3
    ) == relorbit.solve(relorbit.read(EXAMPLES / "tarn_31.ecsv")).elements.P
    for name in relorbit.__all__:
        assert getattr(relorbit, name) is not None
    with pytest.raises(AttributeError, match="has no attribute 'nothing'"):
        _ = relorbit.nothing


def test_folder_of_examples_is_complete():
    names = {path.name for path in Path(EXAMPLES).iterdir()}
    assert names == {
        "README.md", "tarn_31.csv", "tarn_31.ecsv", "quill_8.ecsv", "moss_144.ecsv",
        "lantern_5.ecsv", "heron_77.ecsv", "slate_19_mail.txt", "slate_19_mail.toml",
    }  # fmt: skip
