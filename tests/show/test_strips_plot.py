"""Residual strips before and after a change, looked at through their artists."""

from dataclasses import replace

import numpy as np
import pytest
from invented_pairs import INVENTED, simulate
from matplotlib.backends.backend_agg import FigureCanvasAgg

from relorbit.errors import InputError
from relorbit.show.strips_plot import strips_before_after
from relorbit.solve.residuals import residuals

CHANGED = [5, 20, 40]


@pytest.fixture
def both():
    """One quadrant swapped and one separation doubled, then mended; one measure set aside."""
    good = simulate(INVENTED)
    theta, rho, use = good.theta.copy(), good.rho.copy(), np.ones(len(good), dtype=bool)
    theta[5], rho[20], use[40] = (theta[5] + 180.0) % 360.0, 2.0 * rho[20], False
    return (residuals(INVENTED, replace(good, theta=theta, rho=rho)),
            residuals(INVENTED, replace(good, use=use)))  # fmt: skip


def panels(figure):
    """The panels: across before, across after, along before, along after."""
    return sorted(figure.axes, key=lambda axes: (-axes.get_position().y0, axes.get_position().x0))


def ring(axes):
    (found,) = [line for line in axes.lines if line.get_gid() == "changed"]
    return found


def test_changed_rows_are_ringed_where_their_marks_stand(both):
    before, after = both
    figure = strips_before_after(before, after, CHANGED, title="Invented 1")
    up_before, up_after, low_before, low_after = panels(figure)
    for axes, of, value in (
        (up_before, before, before.arc), (up_after, after, after.arc),
        (low_before, before, before.d_rho), (low_after, after, after.d_rho),
    ):  # fmt: skip
        x, y = ring(axes).get_data()
        np.testing.assert_array_equal(x, of.epoch[CHANGED])
        limit = axes.get_ylim()[1]
        value = 1000.0 * value[CHANGED]
        np.testing.assert_allclose(y, np.where(np.abs(value) > limit, np.sign(value) * 0.85 * limit,
                                               value))  # fmt: skip
    # the quadrant in the upper panel and the separation in the lower lie beyond, only before
    beyond = [[t.get_text() for t in axes.texts if "beyond" in t.get_text()]
              for axes in panels(figure)]  # fmt: skip
    assert beyond == [["1 beyond the scale"], [], ["1 beyond the scale"], []]
    numbers = [{t.get_text() for t in axes.texts if t.get_text().isdigit()}
               for axes in panels(figure)]  # fmt: skip
    assert "6" in numbers[0] and "21" in numbers[2] and "6" not in numbers[2]
    assert numbers[0] | numbers[2] == {"6", "21", "41"}
    assert numbers[:2] == [numbers[0]] * 2 and numbers[2:] == [numbers[2]] * 2


def test_both_sides_have_one_scale_and_one_legend(both):
    figure = strips_before_after(*both, np.isin(np.arange(60), CHANGED))
    up_before, up_after, low_before, low_after = panels(figure)
    assert up_before.get_ylim() == up_after.get_ylim()
    assert low_before.get_ylim() == low_after.get_ylim()
    assert (up_before.get_title(), up_after.get_title()) == ("before", "after")
    assert up_before.get_ylabel() == "O\u2212C across (mas)" and up_after.get_ylabel() == ""
    labels = [text.get_text() for text in figure.legends[0].get_texts()]
    assert "changed (3)" in labels and "interferometer, not used (1)" in labels
    hollow = [line for line in up_after.lines if line.get_gid() == "measures interferometer unused"]
    assert len(hollow) == 1 and hollow[0].get_markerfacecolor() == "none"


@pytest.mark.parametrize("rows", [[], range(40)])
def test_none_and_many_changed_fit_on_the_sheet(both, rows):
    figure = strips_before_after(*both, list(rows), title="t")
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    box = figure.get_tightbbox(canvas.get_renderer())
    width, height = figure.get_size_inches()
    assert box.x0 >= 0.0 and box.y0 >= 0.0 and box.x1 <= width and box.y1 <= height
    assert not any(text.get_text().isdigit() for axes in figure.axes for text in axes.texts)


def test_rows_that_do_not_belong_together_are_refused(both):
    before, after = both
    with pytest.raises(InputError, match="60 measures before and 20 after"):
        strips_before_after(before, residuals(INVENTED, simulate(INVENTED, 20)), [1])
    with pytest.raises(InputError, match="no measure of index 60; there are 60"):
        strips_before_after(before, after, [3, 60])
    with pytest.raises(InputError, match="no measure of index -1"):
        strips_before_after(before, after, [-1])
    with pytest.raises(InputError, match="changed tells of 4 measures"):
        strips_before_after(before, after, [True, False, True, False])
