"""The apparent orbit, looked at through its artists."""

from dataclasses import replace

import numpy as np
import pytest
from invented_pairs import INVENTED, simulate
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_hex
from matplotlib.figure import Figure

from relorbit.derive.ephemeris import ephemeris
from relorbit.measures.table import Measures
from relorbit.orbit.elements import Elements, positions
from relorbit.show.colours import MARKS
from relorbit.show.orbit_plot import apparent_orbit, draw_apparent_orbit
from relorbit.show.view import round_length
from relorbit.solve.residuals import residuals

EDGE_ON = Elements(80.0, 1975.0, 0.3, 1.2, 90.0, 63.0, 40.0)
FACE_ON = Elements(31.0, 1980.0, 0.0, 0.35, 0.0, 0.0, 0.0)


def named(figure, gid):
    """Artists of the first axes with this gid."""
    return [artist for artist in figure.axes[0].findobj() if artist.get_gid() == gid]


def sky(theta, rho):
    return np.stack([rho * np.sin(np.radians(theta)), rho * np.cos(np.radians(theta))], axis=-1)


def mixed() -> Measures:
    """Measures whole and in part, used and not, one of them far away."""
    m = simulate(INVENTED, 24)
    theta, rho, use = m.theta.copy(), m.rho.copy(), np.ones(24, dtype=bool)
    rho[3], theta[11] = np.nan, np.nan
    use[[5, 14, 20]] = False
    rho[20] = 9.4
    columns = {name: getattr(m, name) for name in ("epoch", "theta_err", "rho_err", "technique")}
    return Measures.from_columns(columns | {"theta": theta, "rho": rho, "use": use})


def test_hairlines_run_from_each_measure_to_the_place_of_the_orbit(measures):
    figure = apparent_orbit(INVENTED, measures)
    for technique in ("eyepiece", "plate", "interferometer"):
        (lines,) = named(figure, f"hairlines {technique} used")
        rows = measures.technique == technique
        segments = np.array(lines.get_segments())
        np.testing.assert_allclose(
            segments[:, 1], sky(*positions(INVENTED, measures.epoch[rows])), atol=1e-12
        )
        np.testing.assert_allclose(
            segments[:, 0], sky(measures.theta[rows], measures.rho[rows]), atol=1e-12
        )


def test_measures_have_the_colour_and_marker_of_their_technique():
    names = tuple(MARKS)
    m = simulate(INVENTED, 60, techniques=names)
    figure = apparent_orbit(INVENTED, m)
    assert names == ("eyepiece", "plate", "camera", "interferometer", "space", "unknown")
    expected = {"eyepiece": ("#DDCC77", "D"), "plate": ("#44AA99", "s"), "camera": ("#CC6677", "^"),
                "interferometer": ("#882255", "h"), "space": ("#332288", "p"),
                "unknown": ("#BBBBBB", "o")}  # fmt: skip
    for name in names:
        (marks,) = named(figure, f"measures {name} used")
        assert (marks.get_markerfacecolor(), marks.get_marker()) == expected[name]
        np.testing.assert_allclose(marks.get_xydata(), sky(m.theta, m.rho)[m.technique == name])
    # in grey no two neighbours share a marker
    assert len({mark.marker for mark in MARKS.values()}) == 6


def test_a_measure_not_used_is_hollow_and_a_far_one_is_told():
    figure = apparent_orbit(INVENTED, mixed())
    (hollow,) = named(figure, "measures eyepiece unused")
    assert hollow.get_markerfacecolor() == "none" and len(hollow.get_xdata()) == 1
    assert hollow.get_markeredgewidth() < 1.0
    assert named(figure, "measures interferometer unused") == []
    texts = [text.get_text() for text in figure.axes[0].texts]
    assert "1 measure not used lies outside the picture" in texts
    labels = [text.get_text() for text in figure.legends[0].get_texts()]
    assert "interferometer, not used (1)" in labels and "eyepiece (7)" in labels


def test_a_lone_angle_is_a_dash_outward_and_a_lone_separation_a_dash_across():
    m = mixed()
    figure = apparent_orbit(INVENTED, m)
    computed_theta, computed_rho = positions(INVENTED, m.epoch)
    (angle,) = named(figure, "lone values eyepiece used")
    (start, end), = angle.get_segments()
    np.testing.assert_allclose(0.5 * (start + end), sky(m.theta[3], computed_rho[3]), atol=1e-12)
    along = (end - start) / np.hypot(*(end - start))
    np.testing.assert_allclose(along, sky(m.theta[3], 1.0), atol=1e-9)
    (separation,) = named(figure, "lone values plate used")
    (start, end), = separation.get_segments()
    middle = 0.5 * (start + end)
    np.testing.assert_allclose(middle, sky(computed_theta[11], m.rho[11]), atol=1e-12)
    assert abs(np.dot(end - start, middle)) < 1e-12
    labels = [text.get_text() for text in figure.legends[0].get_texts()]
    assert "angle alone (1)" in labels and "separation alone (1)" in labels


@pytest.mark.parametrize("orientation", ["sky", "eyepiece"])
@pytest.mark.parametrize("elements", [INVENTED, EDGE_ON, FACE_ON])
def test_scales_are_equal_and_directions_as_asked(elements, orientation):
    figure = apparent_orbit(elements, simulate(elements, 20), orientation=orientation)
    FigureCanvasAgg(figure).draw()
    axes = figure.axes[0]
    corner, east, north = axes.transData.transform([[0.0, 0.0], [0.1, 0.0], [0.0, 0.1]])
    sign = 1.0 if orientation == "sky" else -1.0
    assert sign * (east - corner)[0] < 0.0 and sign * (north - corner)[1] > 0.0
    assert abs((east - corner)[0]) == pytest.approx(abs((north - corner)[1]), rel=1e-6)
    # the arms of the compass point the same way
    for letter, way in (("E", east - corner), ("N", north - corner)):
        arm = named(figure, f"compass {letter}")[0]
        start, end = arm.get_transform().transform(arm.get_xydata())
        np.testing.assert_allclose(
            (end - start) / np.hypot(*(end - start)), way / np.hypot(*way), atol=1e-9
        )
        assert axes.bbox.contains(*start) and axes.bbox.contains(*end)


@pytest.mark.parametrize("inclination", [35.0, 145.0])
def test_the_arrowhead_shows_the_true_direction(inclination):
    elements = replace(INVENTED, i=inclination)
    figure = apparent_orbit(elements, simulate(elements, 20))
    (arrow,) = named(figure, "direction")
    corners = arrow.get_xy()
    tip, back = corners[0], 0.5 * (corners[1] + corners[3])
    turn = tip[0] * back[1] - tip[1] * back[0]  # x east, y north: theta grows from y to x
    assert np.sign(turn) == (1.0 if inclination < 90.0 else -1.0)
    middle = 0.5 * (tip + back)
    curve = named(figure, "orbit")[0].get_xydata()
    assert np.hypot(*(curve - middle).T).min() < 0.01 * elements.a


def test_node_and_periastron_stand_where_they_belong():
    figure = apparent_orbit(INVENTED, simulate(INVENTED, 20), line_of_nodes=True)
    (ring,), (tick,), (line,) = (named(figure, g) for g in ("node", "periastron", "line of nodes"))
    x, y = ring.get_xydata()[0]
    assert np.degrees(np.arctan2(x, y)) % 360.0 == pytest.approx(INVENTED.node)
    assert ring.get_markerfacecolor() == "none"
    place = sky(*positions(INVENTED, np.array([INVENTED.T])))[0]
    np.testing.assert_allclose(tick.get_xy()[:4].mean(axis=0), place, atol=1e-9)
    assert tick.get_fill() and to_hex(tick.get_facecolor()) == "#1a1a1a"
    (x0, x1), (y0, y1) = line.get_data()
    assert x0 * y1 - x1 * y0 == pytest.approx(0.0, abs=1e-9) and x0 * x1 < 0.0
    assert "\u03a9" in [text.get_text() for text in figure.axes[0].texts]


def test_a_circular_face_on_orbit_has_neither_node_nor_periastron():
    figure = apparent_orbit(FACE_ON, simulate(FACE_ON, 20))
    assert named(figure, "node") == named(figure, "periastron") == []
    labels = {text.get_text() for text in figure.legends[0].get_texts()}
    assert not labels & {"node", "periastron"} and "orbit" in labels


@pytest.mark.parametrize("elements", [INVENTED, EDGE_ON, FACE_ON, replace(INVENTED, a=0.031),
                                      replace(INVENTED, i=85.0, node=90.0)])  # fmt: skip
def test_nothing_is_cut_and_the_legend_lies_outside(elements):
    m = simulate(elements, 40, scale=elements.a)
    figure = apparent_orbit(elements, m, title="A title", others={"other": INVENTED})
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    renderer, axes = canvas.get_renderer(), figure.axes[0]
    legend = figure.legends[0].get_window_extent(renderer)
    assert not legend.overlaps(axes.get_tightbbox(renderer))
    box, (width, height) = figure.get_tightbbox(renderer), figure.get_size_inches()
    assert box.x0 >= 0.0 and box.x1 <= width and box.y0 >= 0.0 and box.y1 <= height
    pixels = axes.transData.transform(sky(m.theta, m.rho))
    assert all(axes.bbox.contains(*spot) for spot in pixels)


@pytest.mark.parametrize("box", [(0.1, 0.1, 0.8, 0.2), (0.1, 0.1, 0.2, 0.8)])
def test_axes_of_any_shape_keep_equal_scales_and_the_whole_view(box, measures):
    figure = Figure(figsize=(8.0, 8.0))
    axes = figure.add_axes(box)
    view = draw_apparent_orbit(axes, INVENTED, residuals(INVENTED, measures))
    FigureCanvasAgg(figure).draw()
    assert axes.get_xlim() == view.x and axes.get_ylim() == view.y
    corner, east, north = axes.transData.transform([[0.0, 0.0], [0.1, 0.0], [0.0, 0.1]])
    assert abs((east - corner)[0]) == pytest.approx(abs((north - corner)[1]), rel=1e-6)


def test_the_scale_bar_is_as_long_as_it_says():
    figure = apparent_orbit(INVENTED, simulate(INVENTED, 20))
    FigureCanvasAgg(figure).draw()
    axes = figure.axes[0]
    (bar,) = named(figure, "scale bar")
    ends = axes.transData.inverted().transform(bar.get_transform().transform(bar.get_xydata()))
    length = abs(ends[1, 0] - ends[0, 0])
    assert f"{length:.3g}\u2033" in [text.get_text() for text in axes.texts]


@pytest.mark.parametrize(("wanted", "length"), [(0.19, 0.1), (0.2, 0.2), (7.0, 5.0), (1.0, 1.0)])
def test_round_lengths(wanted, length):
    assert round_length(wanted) == pytest.approx(length)


def test_close_pairs_are_drawn_in_mas():
    small = replace(INVENTED, a=0.03)
    figure = apparent_orbit(small, simulate(small, 20, scale=0.02))
    assert figure.axes[0].get_xlabel() == "east (mas)"
    assert apparent_orbit(INVENTED).axes[0].get_xlabel() == "east (arcsec)"


def test_overlays(measures):
    epochs = np.arange(2020.0, 2041.0, 2.0)
    future = ephemeris(INVENTED, epochs)
    other = replace(INVENTED, a=1.1)
    figure = apparent_orbit(INVENTED, measures, others={"older": other}, future=future)
    (dots,) = named(figure, "future")
    np.testing.assert_allclose(dots.get_xydata(), sky(future.theta, future.rho))
    texts = {text.get_text() for text in figure.axes[0].texts}
    assert {"2020", "2024", "2030"} <= texts
    (line,) = named(figure, "other orbit")
    on_it = sky(*positions(other, np.linspace(1900.0, 1960.0, 50)))
    gaps = np.hypot(*(line.get_xydata()[:, None] - on_it[None]).T).min(axis=1)
    assert gaps.max() < 0.01 and line.get_linewidth() < 1.0
    labels = [text.get_text() for text in figure.legends[0].get_texts()]
    assert "older" in labels and "predicted" in labels


def test_an_orbit_without_measures_and_residuals_given(measures):
    assert apparent_orbit(INVENTED).axes[0].get_lines()
    shifted = residuals(replace(INVENTED, a=0.9), measures)
    figure = apparent_orbit(INVENTED, residuals=shifted)
    (lines,) = named(figure, "hairlines plate used")
    ends = np.array(lines.get_segments())[:, 1]
    rows = measures.technique == "plate"
    np.testing.assert_allclose(ends, sky(shifted.theta_computed, shifted.rho_computed)[rows])


def test_an_unknown_orientation_is_refused():
    with pytest.raises(ValueError, match="orientation is sky or eyepiece, not 'mirror'"):
        apparent_orbit(INVENTED, orientation="mirror")
