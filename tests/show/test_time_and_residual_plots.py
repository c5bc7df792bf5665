"""theta, rho and residuals against time, looked at through their artists."""

from dataclasses import replace

import numpy as np
import pytest
from invented_pairs import INVENTED, simulate, solution_of
from matplotlib.backends.backend_agg import FigureCanvasAgg

from relorbit.derive.ephemeris import ephemeris
from relorbit.measures.pair import Pair
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements, positions
from relorbit.show.residual_plot import residual_unit, residuals_over_time
from relorbit.show.time_plot import over_time, theta_curve, time_range
from relorbit.solve.residuals import residuals

EDGE_ON = Elements(80.0, 1975.0, 0.3, 1.2, 90.0, 63.0, 40.0)
ECCENTRIC = Elements(120.0, 1960.0, 0.95, 1.6, 125.0, 30.0, 75.0)
SHORT_PERIOD = Elements(4.7, 1980.0, 0.6, 0.2, 60.0, 30.0, 75.0)


def of_gid(axes, gid):
    return [artist for artist in axes.findobj() if artist.get_gid() == gid]


def slips(measures: Measures, used: bool) -> Measures:
    """The same with one angle turned round and one separation ten times too large."""
    theta, rho, use = measures.theta.copy(), measures.rho.copy(), np.ones(len(measures), dtype=bool)
    theta[2], rho[7] = (theta[2] + 180.0) % 360.0, 10.0 * rho[7]
    use[[2, 7]] = used
    columns = {name: getattr(measures, name) for name in
               ("epoch", "theta_err", "rho_err", "technique")}  # fmt: skip
    return Measures.from_columns(columns | {"theta": theta, "rho": rho, "use": use})


@pytest.mark.parametrize("elements", [INVENTED, EDGE_ON, ECCENTRIC, SHORT_PERIOD])
def test_the_curve_is_the_orbit_and_has_no_vertical_line(elements):
    figure = over_time(elements, simulate(elements, 40))
    theta_axes, rho_axes = (next(a for a in figure.axes if a.get_ylabel().startswith(name))
                            for name in ("position", "separation"))  # fmt: skip
    (curve,) = of_gid(theta_axes, "orbit")
    epoch, theta = curve.get_data()
    good = np.isfinite(theta)
    gap = theta[good] - positions(elements, epoch[good])[0]
    np.testing.assert_allclose(np.remainder(gap + 180.0, 360.0) - 180.0, 0.0, atol=1e-8)
    steps = np.abs(np.diff(theta))
    assert np.nanmax(steps) <= 90.0
    (curve,) = of_gid(rho_axes, "orbit")
    np.testing.assert_allclose(curve.get_ydata(), positions(elements, curve.get_xdata())[1])


@pytest.mark.parametrize("elements", [ECCENTRIC, replace(EDGE_ON, i=89.99)])
def test_the_curve_is_fine_where_the_companion_is_fast(elements):
    _, theta = theta_curve(elements, 1900.0, 2015.0)
    assert np.abs(np.diff(theta)).max() <= 5.0 and np.ptp(theta) > 330.0


def test_measures_stand_on_the_nearest_branch(measures):
    figure = over_time(INVENTED, measures)
    axes = next(a for a in figure.axes if a.get_ylabel().startswith("position"))
    (curve,) = of_gid(axes, "orbit")
    assert np.ptp(curve.get_ydata()) > 360.0  # it runs on
    for technique in ("eyepiece", "plate", "interferometer"):
        (marks,) = of_gid(axes, f"measures {technique} used")
        near = np.interp(marks.get_xdata(), *curve.get_data())
        assert np.abs(marks.get_ydata() - near).max() < 60.0
        np.testing.assert_allclose(
            np.mod(marks.get_ydata(), 360.0), measures.theta[measures.technique == technique]
        )
    FigureCanvasAgg(figure).draw()
    assert {"0", "90", "180", "270"} >= {label.get_text() for label in axes.get_yticklabels()}


def test_many_revolutions_are_folded():
    m = simulate(SHORT_PERIOD, 40)
    figure = over_time(SHORT_PERIOD, m)
    axes = next(a for a in figure.axes if a.get_ylabel().startswith("position"))
    assert axes.get_ylim() == (0.0, 360.0)
    (marks,) = of_gid(axes, "measures plate used")
    np.testing.assert_allclose(marks.get_ydata(), m.theta[m.technique == "plate"])


def test_the_time_goes_a_bit_beyond_what_is_known(measures):
    compared = residuals(INVENTED, measures)
    first, last = time_range(INVENTED, compared, None)
    assert first < measures.epoch.min() - 1.0 and last > measures.epoch.max() + 1.0
    assert time_range(INVENTED, compared, ephemeris(INVENTED, [2040.0]))[1] > 2040.0
    bare = over_time(INVENTED)
    assert np.ptp(bare.axes[0].get_xlim()) == pytest.approx(1.1 * INVENTED.P)


def test_error_bars_are_those_of_the_fit(measures):
    columns = {name: getattr(measures, name) for name in ("epoch", "theta", "rho", "technique")}
    bare = Measures.from_columns(columns)
    compared = residuals(INVENTED, bare)  # errors are defaults of the technique
    axes = next(a for a in over_time(INVENTED, bare).axes if a.get_ylabel().startswith("sep"))
    bars = np.concatenate([np.array(lines.get_segments()) for lines in axes.collections])
    lengths = sorted(np.ptp(bars[:, :, 1], axis=1))
    np.testing.assert_allclose(lengths, sorted(2.0 * compared.rho_err))


def test_the_band_is_one_sigma_about_the_curve():
    short = Elements(400.0, 2050.0, 0.5, 3.1, 60.0, 150.0, 200.0)
    m = simulate(short, 40, 1900.0, 2000.0)
    solution = solution_of(short, Pair("invented", m))
    future = ephemeris(solution, np.linspace(2010.0, 2050.0, 21))
    figure = over_time(short, m, ephemeris=future)
    axes = next(a for a in figure.axes if a.get_ylabel().startswith("sep"))
    (band,) = of_gid(axes, "predicted error")
    edge = band.get_paths()[0].vertices
    near = edge[np.abs(edge[:, 0] - 2050.0) < 0.2, 1]
    assert np.ptp(near) == pytest.approx(2.0 * future.rho_sigma[-1], rel=0.05)
    assert edge[:, 0].min() > 2009.0
    bare = over_time(short, m, ephemeris=ephemeris(short, [2010.0, 2050.0]))
    assert of_gid(bare.axes[0], "predicted error") == []


def test_measures_beyond_the_scale_are_counted_and_those_used_are_seen(measures):
    for used, words in ((False, ["1 beyond the scale"] * 2), (True, [])):
        figure = over_time(INVENTED, slips(measures, used))
        told = [text.get_text() for axes in figure.axes for text in axes.texts]
        assert [text for text in told if "beyond" in text] == words


def test_residual_panels():
    measures = simulate(INVENTED, 60, seed=8, scale=2.0)
    compared = residuals(INVENTED, measures)
    across, along = sorted(residuals_over_time(compared).axes, key=lambda a: -a.get_position().y0)
    assert residual_unit(compared) == ("arcsec", 1.0)
    assert across.get_ylabel() == "O\u2212C across (arcsec)" and across.get_xlabel() == ""
    assert along.get_ylabel() == "O\u2212C along (arcsec)"
    rows = measures.technique == "plate"
    for axes, value in ((across, compared.arc), (along, compared.d_rho)):
        (marks,) = of_gid(axes, "measures plate used")
        np.testing.assert_allclose(marks.get_data(), (measures.epoch[rows], value[rows]))
        low, high = axes.get_ylim()
        assert low == -high and np.abs(value).max() < 0.9 * high
        assert any(np.array_equal(line.get_ydata(), [0.0, 0.0]) for line in axes.lines)
    assert across.get_shared_x_axes().joined(across, along)
    bars = np.concatenate([np.array(lines.get_segments()) for lines in across.collections])
    expected = 2.0 * compared.rho_computed * np.radians(compared.theta_err)
    np.testing.assert_allclose(sorted(np.ptp(bars[:, :, 1], axis=1)), sorted(expected))


def test_small_residuals_are_drawn_in_mas():
    small = replace(INVENTED, a=0.05)
    compared = residuals(small, simulate(small, 20, scale=0.02))
    figure = residuals_over_time(compared)
    assert {axes.get_ylabel() for axes in figure.axes} == {"O\u2212C across (mas)",
                                                           "O\u2212C along (mas)"}  # fmt: skip
    (marks,) = of_gid(figure.axes[0], "measures plate used")
    rows = compared.technique == "plate"
    np.testing.assert_allclose(marks.get_ydata(), 1000.0 * compared.d_rho[rows])


def test_residuals_not_used_do_not_set_the_scale(measures):
    compared = residuals(INVENTED, slips(measures, used=False))
    across, along = sorted(residuals_over_time(compared).axes, key=lambda a: -a.get_position().y0)
    for axes in (across, along):
        hollow = of_gid(axes, "measures eyepiece unused")
        assert axes.get_ylim()[1] < 400.0 and axes.get_ylabel().endswith("(mas)")
        # one stands at its residual, the other near the edge
        heights = sorted(abs(line.get_ydata()[0]) / axes.get_ylim()[1] for line in hollow)
        assert heights[0] < heights[1] == pytest.approx(0.85)
        assert {line.get_markerfacecolor() for line in hollow} == {"none"}
        assert [text.get_text() for text in axes.texts] == ["1 beyond the scale"]
    used = residuals(INVENTED, slips(measures, used=True))
    assert max(axes.get_ylim()[1] for axes in residuals_over_time(used).axes) > 5.0


@pytest.mark.parametrize("count", [1, 3, 2000])
def test_few_and_many_measures(count):
    m = simulate(INVENTED, count)
    for figure in (over_time(INVENTED, m, title="t"),
                   residuals_over_time(residuals(INVENTED, m), title="t")):  # fmt: skip
        canvas = FigureCanvasAgg(figure)
        canvas.draw()
        box = figure.get_tightbbox(canvas.get_renderer())
        width, height = figure.get_size_inches()
        assert box.x0 >= 0.0 and box.y0 >= 0.0 and box.x1 <= width and box.y1 <= height
        drawn = sum(len(line.get_xdata()) for axes in figure.axes for line in axes.lines
                    if (line.get_gid() or "").startswith("measures"))  # fmt: skip
        assert drawn == 2 * count
