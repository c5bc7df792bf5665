"""The figures of weights and of the periodogram, and the tables in words."""

import numpy as np
import pytest
from noisy_histories import companion_trial

from relorbit.errors import InputError
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import Elements, complex_position, polar
from relorbit.show.companion_text import companion_text
from relorbit.show.noise_text import noise_table
from relorbit.show.periodogram_plot import periodogram
from relorbit.show.text import solution_text
from relorbit.show.weight_plot import weights_over_time
from relorbit.solve.solver import solve

TRUTH = Elements(42.0, 1989.0, 0.46, 0.88, 57.0, 64.0, 212.0)


@pytest.fixture(scope="module")
def slipped():
    rng = np.random.default_rng(5)
    epoch = np.linspace(1955.0, 2015.0, 50)
    theta, rho = polar(complex_position(TRUTH, epoch))
    rho = rho + 0.01 * rng.normal(size=50)
    theta = (theta + 0.8 * rng.normal(size=50)) % 360.0
    rho[20] += 0.4
    observer = ["A" if k < 25 else "B" for k in range(50)]
    technique = ["plate" if k < 25 else "camera" for k in range(50)]
    return Pair.from_arrays(epoch, theta, rho, None, None, observer=observer, technique=technique)


def test_every_measure_has_a_mark_and_slips_are_hollow(slipped):
    solution = solve(slipped, errors="from-residuals")
    figure = weights_over_time(solution, title="Invented 5")
    (axes,) = figure.axes
    marks = [line for line in axes.lines if line.get_marker() not in ("None", "")]
    assert len(marks) == 50
    hollow = [line for line in marks if line.get_markerfacecolor() == "none"]
    down = {row for group in solution.noise for row in group.down_weighted}
    assert 20 in down and len(down) < 4
    shown = {float(line.get_xdata()[0]) for line in hollow}
    assert shown == {float(slipped.measures.epoch[row]) for row in down}
    assert {text.get_text() for text in axes.texts} == {"plate, A", "camera, B"}
    assert axes.get_yscale() == "log"
    full = np.median([line.get_ydata()[0] for line in marks])
    assert min(line.get_ydata()[0] for line in hollow) < full
    with pytest.raises(InputError, match="errors were taken as given"):
        weights_over_time(solve(slipped))


def test_the_table_names_group_scale_share_and_slip(slipped):
    solution = solve(slipped, errors="from-residuals")
    table = noise_table(solution.noise)
    assert table.isascii()
    (line,) = [line for line in table.splitlines() if line.startswith("plate, A")]
    assert line.split()[2] == "25" and "21" in line.split()[-3:]
    assert table in solution_text(solution)
    assert noise_table(()) == ""
    offsets = noise_table(solve(slipped, errors="from-residuals", offsets="all").noise)
    assert "theta offset" in offsets and "others are better left out" in offsets


def test_the_periodogram_shows_the_period_and_both_levels():
    search = companion_trial(3, 0.02)
    figure = periodogram(search, title="Invented 6")
    (axes,) = figure.axes
    curve, analytic, shuffled = axes.lines
    assert curve.get_xdata()[np.argmax(curve.get_ydata())] == pytest.approx(6.0, rel=0.02)
    assert analytic.get_ydata()[0] == search.threshold
    assert shuffled.get_ydata()[0] == search.threshold_permuted
    assert axes.get_ylim()[1] > search.power.max()
    text = companion_text(search)
    assert text.isascii()
    assert "a signal worth following: period" in " ".join(text.split())
    assert "nothing: the best period" in " ".join(companion_text(companion_trial(3, 0.0)).split())
