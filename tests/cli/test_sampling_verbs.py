"""The verbs sample and kind, ephemeris from samples, and the answer of solve to a short arc."""

from __future__ import annotations

import json

import numpy as np
import pytest
from command import EXAMPLES

HEADER = "epoch,theta,rho,theta_err,rho_err\n"


def straight_list(path, count=12, error=0.02):
    """Two stars passing, seen for 22 years."""
    rng = np.random.default_rng(1)
    epoch = np.linspace(2000.0, 2022.0, count)
    z = 1.0 + 0.8j + (0.01 - 0.004j) * (epoch - 2011.0)
    z = z + error * (rng.normal(size=count) + 1j * rng.normal(size=count))
    theta, rho = np.degrees(np.angle(z)) % 360.0, np.abs(z)
    rows = zip(epoch, theta, rho, np.degrees(error / rho), np.full(count, error), strict=True)
    lines = [",".join(f"{value:.5f}" for value in row) for row in rows]
    path.write_text(HEADER + "\n".join(lines) + "\n")
    return path


def test_sample_prints_intervals_and_saves_what_ephemeris_reads(run, tarn, tmp_path):
    done = run("sample", tarn, "--size", 1000, "--out", "s.ecsv")
    assert done.returncode == 0, done.stderr
    for word in ("effective samples", "prior:", "median", "total mass", "written: s.ecsv"):
        assert word in done.stdout
    told = run("ephemeris", "--from-samples", "s.ecsv", "--at", "2027.0,2030.0")
    assert told.returncode == 0, told.stderr
    assert len([line for line in told.stdout.splitlines() if line.strip().startswith("20")]) == 2
    told = run("ephemeris", "--from-samples", "s.ecsv", "--at", "2027", "--json")
    found = json.loads(told.stdout)
    assert found["schema"] == "relorbit/sampled-ephemeris/1"
    fit = json.loads(run("ephemeris", tarn, "--at", "2027", "--json").stdout)["rows"][0]
    assert found["rows"][0]["rho"][2] == pytest.approx(fit["rho"], abs=2 * fit["rho_sigma"])


def test_sample_json_is_the_same_for_a_seed(run, tarn):
    one, two, other = (
        run("sample", tarn, "--size", 500, "--seed", seed, "--json").stdout for seed in (1, 1, 2)
    )
    assert one == two != other
    found = json.loads(one)
    assert found["schema"] == "relorbit/posterior/1"
    assert found["effective_size"] >= 500
    assert found["intervals"]["P"]["median"] == pytest.approx(62.4, abs=0.5)


def test_sample_draws_every_figure(run, tarn, tmp_path):
    names = {"corner": "c.png", "orbits": "o.pdf", "bands": "b.svg", "masses": "m.png"}
    options = [word for name, path in names.items() for word in (f"--{name}", path)]
    done = run("sample", tarn, "--size", 500, *options)
    assert done.returncode == 0, done.stderr
    for path in names.values():
        assert (tmp_path / path).stat().st_size > 2000


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (("--size", "0"), "the size 0 is not a whole number"),
        (("--size", "-3"), "the size -3"),
        (("--size", "99999999999"), "the size 99999999999"),
        (("--prior", "lucky"), "'lucky' is not a prior"),
        (("--out", "s.txt"), "samples are written as .ecsv or .fits"),
        (("--corner", "c.bmp"), "a figure is written as"),
        (("--period-range", "9:2"), "--period-range"),
    ],
)
def test_sample_refuses_in_one_line(run, tarn, tmp_path, options, said):
    before = sorted(tmp_path.iterdir())
    done = run("sample", tarn, *options)
    assert done.returncode == 2
    assert said in done.stderr
    assert done.stderr.count("\n") == 1
    assert sorted(tmp_path.iterdir()) == before


def test_ephemeris_from_samples_takes_no_pair(run, tarn):
    done = run("ephemeris", tarn, "--from-samples", "s.ecsv", "--at", "2027")
    assert done.returncode == 2
    assert "leave PAIR and --elements out" in done.stderr


def test_sample_of_one_epoch_is_status_3(run, tmp_path):
    path = tmp_path / "one.csv"
    path.write_text(HEADER + "2001.5,120,1.23,0.5,0.01\n" * 4)
    done = run("sample", path)
    assert done.returncode == 3
    assert "all at one epoch" in done.stderr


def test_errors_from_the_residuals_on_the_command_line(run, tarn):
    options = ("--errors", "from-residuals", "--group-by", "technique")
    found = json.loads(run("sample", tarn, "--size", 300, *options, "--json").stdout)
    assert found["errors"] == "from-residuals"
    assert found["noise"][0]["across_factor"] > 0.0
    given = json.loads(run("sample", tarn, "--size", 300, "--json").stdout)
    assert (given["errors"], given["noise"]) == ("as-given", [])
    told = run("kind", tarn, *options)
    assert told.returncode == 0, told.stderr
    assert "errors from the residuals" in " ".join(told.stdout.split())
    refused = run("sample", tarn, "--scale-errors", *options)
    assert refused.returncode == 2
    assert "ask for one of the two" in refused.stderr


def test_one_sample_is_json(run, tarn):
    done = run("sample", tarn, "--size", 1, "--json")
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout)["size"] == 1


def test_kind_says_orbit_or_not_in_words(run, tarn, tmp_path):
    shown = run("kind", tarn)
    assert shown.returncode == 0, shown.stderr
    assert "orbit shown" in shown.stdout
    passing = run("kind", straight_list(tmp_path / "line.csv"))
    assert passing.returncode == 0, passing.stderr
    assert "orbit shown" not in passing.stdout
    for word in ("straight motion", "closest separation", "BIC", "per cent"):
        assert word in passing.stdout


def test_kind_takes_the_mass_and_the_companion(run, tarn):
    done = run("kind", tarn, "--mass", "1.9:0.2", "--secondary", "parallax=95.1,parallax_err=0.5",
               "--json")  # fmt: skip
    assert done.returncode == 0, done.stderr
    escape = json.loads(done.stdout)["escape"]
    assert escape["escape_km_s"] > escape["speed_km_s"]
    assert escape["parallax_gap"] == pytest.approx(0.1 / np.hypot(0.4, 0.5), rel=1e-6)
    wrong = run("kind", tarn, "--secondary", "colour=3")
    assert wrong.returncode == 2
    assert "--secondary: colour is not one of" in wrong.stderr
    wrong = run("kind", tarn, "--mass", "2")
    assert wrong.returncode == 2
    assert "VALUE:ERROR" in wrong.stderr


def test_solve_of_a_short_arc_says_what_is_known_and_points_to_sample(run, tmp_path):
    done = run("solve", straight_list(tmp_path / "line.csv"))
    assert done.returncode == 3
    for word in ("Known: at", "a^3/P^2 is", "relorbit sample", "longer than about"):
        assert word in done.stderr
    assert done.stderr.count("\n") == 1
    found = json.loads(run("solve", tmp_path / "line.csv", "--json").stdout)
    span = found["known"]["axis_cubed_over_period_squared"]
    assert 0.0 < span["low95"] < span["median"] < span["high95"]
    assert found["known"]["acceleration_seen"] is False


def test_heron_is_a_short_arc_that_sample_answers(run):
    done = run("sample", EXAMPLES / "heron_77.ecsv", "--size", 1000, "--json")
    assert done.returncode == 0, done.stderr
    truth = {"P": 310.0, "e": 0.38, "a": 2.6, "i": 63.0}
    for name, value in truth.items():
        one = json.loads(done.stdout)["intervals"][name]
        assert one["low95"] < value < one["high95"]


def test_three_measures_are_sampled_with_their_errors_as_given(run, tmp_path):
    path = tmp_path / "three.csv"
    path.write_text(HEADER + "2001.5,120,1.23,0.5,0.01\n2009.5,140,1.2,0.5,0.01\n"
                    "2018.2,161,1.1,0.5,0.01\n")  # fmt: skip
    done = run("sample", path, "--size", 300)
    assert done.returncode == 0, done.stderr
    assert "errors as given" in done.stdout
    assert "6 values for 7 unknowns" in " ".join(done.stdout.split())
    assert run("kind", path).returncode == 0
