"""The parts of the window: pictures, table, colours, sizes."""

from __future__ import annotations

import statistics
import time
from pathlib import Path

import numpy as np
import pytest
from desk.actions import RandomUser, undo_all
from desk.windows import INVENTED, answer, invented_pair, opened, press, settle
from matplotlib.colors import to_hex

from relorbit.desk.parts import on_screen
from relorbit.desk.plot_view import PlotView
from relorbit.desk.settings import Settings
from relorbit.desk.theme import DARK, LIGHT, Palette
from relorbit.desk.window import Desk
from relorbit.measures.pair import Pair
from relorbit.orbit.elements import NAMES


@pytest.fixture
def looked_at(desk: Desk) -> Desk:
    """A window with 60 invented measures and an orbit."""
    opened(desk, invented_pair(60))
    settle(desk, 0.4)
    return desk


def spot(view: PlotView, axes: object, row: int) -> tuple[int, int]:
    """Where a measure is in a picture, pixels from the upper left."""
    x, y = axes.transData.transform(view.spots[axes][row])
    return round(float(x)), round(view.widget.winfo_height() - float(y))


def click(view: PlotView, x: int, y: int, button: int = 1, state: int = 0) -> None:
    view.widget.event_generate("<Motion>", x=x, y=y)
    view.widget.event_generate(f"<ButtonPress-{button}>", x=x, y=y, state=state)
    view.widget.event_generate(f"<ButtonRelease-{button}>", x=x, y=y, state=state)
    view.update()


def drag(
    view: PlotView, start: tuple[int, int], end: tuple[int, int], button: int = 1, state: int = 0
) -> None:
    held = {1: 0x100, 2: 0x200, 3: 0x400}[button] | state
    middle = tuple((a + b) // 2 for a, b in zip(start, end, strict=True))
    view.widget.event_generate("<Motion>", x=start[0], y=start[1])
    view.widget.event_generate(f"<ButtonPress-{button}>", x=start[0], y=start[1], state=state)
    for x, y in (middle, end):
        view.widget.event_generate("<Motion>", x=x, y=y, state=held)
    view.widget.event_generate(f"<ButtonRelease-{button}>", x=end[0], y=end[1], state=held)
    view.update()


# -- pictures --------------------------------------------------------------------------------------


def test_a_click_selects_everywhere(looked_at: Desk) -> None:
    desk = looked_at
    lonely = int(np.argmin(desk.model.pair.measures.epoch))
    for view, axes in ((desk.strips, desk.strips.along), (desk.strips, desk.strips.across)):
        click(view, *spot(view, axes, lonely))
        assert lonely in desk.model.selection
        for ring in (desk.sky._ring, *(ring for _, ring in desk.strips._over.values())):
            assert len(ring.get_xdata()) == 1
        tag = desk.table.tree.item(desk.table._lines[lonely - desk.table.first], "tags")[0]
        assert tag.startswith("chosen")
        box = view.widget
        click(view, box.winfo_width() - 3, 3)  # outside the axes: nothing changes
        assert desk.model.selection == {lonely}
        desk.model.select(())


def test_the_table_selects_in_the_pictures_and_scrolls_to_what_pictures_select(
    looked_at: Desk,
) -> None:
    desk = looked_at
    press(desk, "End")
    last = len(desk.model.pair.measures) - 1
    assert desk.model.selection == {last}
    x, y = desk.sky._ring.get_data()
    assert (x[0], y[0]) == pytest.approx(tuple(desk.sky.spots[desk.sky.axes][last]))
    assert desk.table.first > 0
    click(desk.strips, *spot(desk.strips, desk.strips.along, 0))
    assert 0 in desk.model.selection
    assert desk.table.first == 0


def test_a_box_selects_and_shift_adds(looked_at: Desk) -> None:
    desk = looked_at
    strips, epoch = desk.strips, desk.model.pair.measures.epoch
    box = strips.along.bbox
    height = strips.widget.winfo_height()

    def at(year: float) -> int:
        return round(float(strips.along.transData.transform((year, 0.0))[0]))

    top, foot = round(height - box.y1) + 1, round(height - box.y0) - 1
    drag(strips, (at(1940.0), top), (at(1950.0), foot))
    expected = set(np.flatnonzero((epoch > 1940.0) & (epoch < 1950.0)).tolist())
    assert len(expected) > 3
    assert desk.model.selection == expected
    drag(strips, (at(1960.0), top), (at(1965.0), foot), state=0x1)
    expected |= set(np.flatnonzero((epoch > 1960.0) & (epoch < 1965.0)).tolist())
    assert desk.model.selection == expected
    assert not strips.widget.find_withtag("all") or len(strips.widget.find_all()) == 1


def test_pointing_at_a_measure_tells_of_it(looked_at: Desk) -> None:
    desk = looked_at
    row = 11
    x, y = spot(desk.strips, desk.strips.along, row)
    desk.strips.widget.event_generate("<Motion>", x=x, y=y)
    desk.root.update()
    assert desk.strips._hover.winfo_ismapped()
    said = desk.strips._hover["text"]
    pair, of = desk.model.pair.measures, desk.model.consequences.residuals
    assert f"{pair.epoch[row]:.3f}  {pair.observer[row]}, eyepiece" in said
    assert f"\u03b8 {pair.theta[row]:.1f}\u00b0   \u03c1 {pair.rho[row]:.3f}\u2033" in said
    signed = f"{of.theta_in_sigma[row]:+.1f}"
    assert f"\u03b8 {signed} \u03c3" in said
    desk.strips.widget.event_generate("<Motion>", x=2, y=2)
    desk.root.update()
    assert not desk.strips._hover.winfo_ismapped()


def test_the_wheel_zooms_about_the_pointer_and_reset_shows_all(looked_at: Desk) -> None:
    desk = looked_at
    sky = desk.sky
    before = sky.axes.get_xlim(), sky.axes.get_ylim()
    x, y = spot(sky, sky.axes, 20)
    sky.widget.event_generate("<Button-4>", x=x, y=y)
    settle(desk, 0.1)
    assert spot(sky, sky.axes, 20) == pytest.approx((x, y), abs=1)
    assert np.ptp(sky.axes.get_xlim()) == pytest.approx(np.ptp(before[0]) / 1.25)
    scale = np.abs(np.ptp(sky.axes.transData.inverted().transform([(0, 0), (50, 50)]), axis=0))
    assert scale[0] == pytest.approx(scale[1])  # a circle stays a circle
    press(desk, "0")
    settle(desk, 0.1)
    assert sky.axes.get_xlim() == pytest.approx(before[0])
    assert sky.axes.get_ylim() == pytest.approx(before[1])


@pytest.mark.parametrize("button", [2, 3])
def test_dragging_with_another_button_moves_the_picture(looked_at: Desk, button: int) -> None:
    desk = looked_at
    sky = desk.sky
    x, y = spot(sky, sky.axes, 20)
    drag(sky, (150, 150), (190, 120), button)
    settle(desk, 0.1)
    assert spot(sky, sky.axes, 20) == pytest.approx((x + 40, y - 30), abs=1)
    assert not desk.model.selection
    desk.model.edit_cell(20, "note", "an edit keeps the view")
    settle(desk, 0.2)
    assert spot(sky, sky.axes, 20) == pytest.approx((x + 40, y - 30), abs=1)


def test_dragging_with_space_held_moves_the_picture(looked_at: Desk) -> None:
    desk = looked_at
    sky = desk.sky
    x, y = spot(sky, sky.axes, 20)
    sky.widget.focus_force()
    desk.root.update()
    sky.widget.event_generate("<KeyPress-space>")
    drag(sky, (150, 150), (190, 120))
    sky.widget.event_generate("<KeyRelease-space>")
    settle(desk, 0.1)
    assert spot(sky, sky.axes, 20) == pytest.approx((x + 40, y - 30), abs=1)
    assert not desk.model.selection


def test_both_strips_share_the_zoom_of_time(looked_at: Desk) -> None:
    strips = looked_at.strips
    heights = [panel.get_ylim() for panel in (strips.across, strips.along)]
    x, y = spot(strips, strips.across, 30)
    strips.widget.event_generate("<Button-4>", x=x, y=y)
    settle(looked_at, 0.1)
    assert strips.across.get_xlim() == strips.along.get_xlim()
    assert [panel.get_ylim() for panel in (strips.across, strips.along)] == heights


def test_the_sky_turns_for_the_eyepiece(looked_at: Desk) -> None:
    desk = looked_at
    x, y = desk.sky.axes.get_xlim(), desk.sky.axes.get_ylim()
    assert x[0] > x[1] and y[0] < y[1]  # east left, north up
    press(desk, "o")
    settle(desk, 0.2)
    x, y = desk.sky.axes.get_xlim(), desk.sky.axes.get_ylim()
    assert x[0] < x[1] and y[0] > y[1]


def test_strips_by_phase(looked_at: Desk) -> None:
    desk = looked_at
    press(desk, "p")
    settle(desk, 0.2)
    epoch = desk.model.pair.measures.epoch
    seen = desk.strips.spots[desk.strips.along][:, 0]
    turns = (epoch - INVENTED.T) / INVENTED.P
    assert seen == pytest.approx(turns - np.floor(turns))


def test_orbits_on_record_are_overlaid_and_hidden(looked_at: Desk) -> None:
    desk = looked_at
    desk.model.keep("the first", "", "", "")
    desk.elements.nudge("a", 5.0, False)
    settle(desk, 0.3)
    desk.sky.reset()
    settle(desk, 0.2)

    def thin() -> list[str]:
        return [line.get_label() for line in desk.sky.axes.lines if line.get_gid() == "other orbit"]

    assert thin() == ["the first"]
    press(desk, "r")
    settle(desk, 0.2)
    assert thin() == []


# -- speed -----------------------------------------------------------------------------------------


def test_nudging_500_measures_is_quick_beside_a_full_redraw(desk: Desk) -> None:
    opened(desk, invented_pair(500))
    settle(desk, 0.5)
    quick, full, nudges = [], [], []
    for k in range(21):
        start = time.perf_counter()
        desk.elements.nudge(NAMES[k % 7], 1.0, True)
        nudges.append(time.perf_counter() - start)
        desk.root.update()
        for times, act in ((quick, _repaint), (full, _draw)):
            start = time.perf_counter()
            act(desk)
            times.append(time.perf_counter() - start)
    assert statistics.median(full) > 4.0 * statistics.median(quick)
    assert statistics.median(nudges) < 0.05


def _repaint(desk: Desk) -> None:
    for view in (desk.sky, desk.strips):
        view.feed()
        view.repaint()


def _draw(desk: Desk) -> None:
    for view in (desk.sky, desk.strips):
        view.canvas.draw()


def test_a_repainted_picture_is_the_one_drawn_in_full(looked_at: Desk) -> None:
    desk = looked_at
    desk.model.select({5, 50})
    desk.elements.nudge("i", 3.0, False)
    settle(desk, 0.5)  # what stands on the curve comes back in a pause
    for view in (desk.sky, desk.strips):
        view.repaint()
        repainted = np.array(view.canvas.buffer_rgba())
        view.canvas.draw()
        assert np.array_equal(repainted, np.asarray(view.canvas.buffer_rgba()))


# -- the table -------------------------------------------------------------------------------------


def column(desk: Desk, name: str) -> list[str]:
    return [desk.table.tree.set(line, name) for line in desk.table._lines]


def test_only_visible_rows_are_made(desk: Desk) -> None:
    opened(desk, invented_pair(20_000))
    settle(desk, 0.5)
    lines = len(desk.table._lines)
    assert 5 <= lines <= 60
    start = time.perf_counter()
    for k in range(50):
        desk.table._scrolled("moveto", str(k / 50))
        desk.root.update()
    assert time.perf_counter() - start < 2.0
    press(desk, "End")
    assert len(desk.table._lines) == lines
    assert column(desk, "epoch")[-1] == f"{desk.model.pair.measures.epoch[-1]:.3f}"


def test_every_column_sorts_both_ways(looked_at: Desk) -> None:
    table, measures = looked_at.table, looked_at.model.pair.measures
    for name in ("rho", "theta", "observer"):
        table.sort(name)
        values = getattr(measures, name)[table.rows]
        assert np.all(values[:-1] <= values[1:])
        table.sort(name)
        values = getattr(measures, name)[table.rows]
        assert np.all(values[:-1] >= values[1:])
    table.sort("off_theta")
    off = np.abs(looked_at.model.consequences.residuals.theta_in_sigma)
    assert table.rows[0] == np.argmax(off)


def test_filters_choose_rows_and_say_how_many(looked_at: Desk) -> None:
    table, measures = looked_at.table, looked_at.model.pair.measures
    table.filters.technique.set("camera")
    table.filters.technique.event_generate("<<ComboboxSelected>>")
    assert set(measures.technique[table.rows]) == {"camera"}
    table.filters.first.insert(0, "1990")
    table.filters.first.focus_force()
    looked_at.root.update()
    table.filters.first.event_generate("<KeyRelease>", keysym="0")
    expected = (measures.technique == "camera") & (measures.epoch >= 1990.0)
    assert table.rows.tolist() == np.flatnonzero(expected).tolist()
    assert table.filters.count["text"] == f"{expected.sum()} of 60 shown"
    press(looked_at, "Control-a")
    assert looked_at.model.selection == set(np.flatnonzero(expected).tolist())
    table.filters.clear.invoke()
    assert len(table.rows) == 60


def test_a_cell_is_edited_in_place(looked_at: Desk) -> None:
    desk = looked_at
    table = desk.table
    table.at, table.column = 4, "theta"
    press(desk, "Return")
    field = table.editor.field
    assert field.winfo_ismapped()
    assert field.get() == repr(float(desk.model.pair.measures.theta[4]))
    field.set("400")
    field.event_generate("<Return>")
    settle(desk, 0.05)
    assert table.editor.open
    assert table.editor.wrong["text"].startswith("400 is outside [0, 360)")
    assert table.editor.wrong.winfo_ismapped()
    assert field.get() == "400"
    field.set("123,5")
    field.event_generate("<Return>")
    settle(desk, 0.05)
    assert not table.editor.open and not field.winfo_ismapped()
    assert desk.model.pair.measures.theta[4] == 123.5
    assert desk.model.pair.measures.theta_obs[4] == pytest.approx(
        invented_pair(60).measures.theta[4]
    )
    assert table.at == 5


def test_escape_leaves_the_cell_as_it_was(looked_at: Desk) -> None:
    desk = looked_at
    before = desk.model.pair
    press(desk, "F2")
    assert desk.table.editor.open
    desk.table.editor.field.set("12")
    desk.table.editor.field.event_generate("<Escape>")
    assert not desk.table.editor.open
    assert desk.model.pair is before


def test_a_cell_whose_measure_is_gone_changes_no_other(looked_at: Desk) -> None:
    """Found by the random user, seed 3: the file was read again while a cell was open."""
    desk = looked_at
    press(desk, "F2")
    assert desk.table.editor.open
    desk.table.editor.field.set("12")
    fewer = desk.model.pair.with_measures(desk.model.pair.measures.select(range(1, 20)))
    desk.model.take_in(fewer)
    assert desk.table.editor.take()
    assert not desk.table.editor.open
    assert desk.model.pair is fewer


def test_measures_set_aside_stay_and_are_quiet(looked_at: Desk) -> None:
    desk = looked_at
    desk.model.select({1, 2})
    answer(desk, "Set aside", reason="poor night")
    press(desk, "x")
    assert column(desk, "state")[1:3] == ["set aside", "set aside"]
    assert str(desk.table.tree.tag_configure("aside", "foreground")) == desk.palette.quiet
    press(desk, "u")
    assert column(desk, "state")[1:3] == ["", ""]


def test_a_pair_without_measures_and_lone_values_can_be_looked_at(desk: Desk) -> None:
    desk.session.new_pair()
    desk.show_desk()
    settle(desk, 0.2)
    desk.model.add_measure("1990.5", "12", "")
    desk.model.add_measure("1992.5", "", "1.1")
    settle(desk, 0.2)
    desk.model.set_elements(INVENTED)
    settle(desk, 0.2)
    assert np.isfinite(desk.sky.spots[desk.sky.axes]).all()


# -- colours and sizes -----------------------------------------------------------------------------


def contrast(one: str, other: str) -> float:
    """Contrast ratio of two colours by WCAG 2.2 (relative luminance of sRGB)."""
    levels = []
    for colour in (one, other):
        parts = [int(colour[k : k + 2], 16) / 255 for k in (1, 3, 5)]
        linear = [p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
        levels.append(float(np.dot(linear, (0.2126, 0.7152, 0.0722))))
    return (max(levels) + 0.05) / (min(levels) + 0.05)


def test_contrast_is_computed_as_published() -> None:
    assert contrast("#FFFFFF", "#000000") == pytest.approx(21.0)
    assert contrast("#777777", "#FFFFFF") == pytest.approx(4.48, abs=0.005)  # from memory


@pytest.mark.parametrize("palette", [LIGHT, DARK], ids=lambda one: one.name)
def test_text_is_readable(palette: Palette) -> None:
    for text in (palette.ink, palette.quiet, palette.warn):
        for behind in (palette.ground, palette.paper):
            assert contrast(text, behind) >= 4.5, (text, behind)
    for text in (palette.ink, palette.quiet, palette.accent):
        assert contrast(text, palette.chosen) >= 4.5, text
    assert contrast(palette.on_accent, palette.accent) >= 4.5
    assert contrast(palette.accent, palette.paper) >= 4.5
    for name in ("curve", "today"):
        assert contrast(getattr(palette, name), palette.paper) >= 4.5, name
    for technique, edge in palette.edges.items():
        assert contrast(edge, palette.paper) >= 4.5, technique


@pytest.mark.parametrize("scale", [1.0, 2.0])
def test_sizes_follow_the_scaling_and_nothing_needed_is_cut(display: str, tmp_path: Path,
                                                            scale: float) -> None:  # fmt: skip
    settings = Settings.load(tmp_path)
    settings.scale = scale
    desk = Desk(settings)
    try:
        desk.root.geometry(f"{desk.root.winfo_screenwidth()}x"
                           f"{desk.root.winfo_screenheight() - desk.sizes(30)}+0+0")  # fmt: skip
        desk.files.open_example("tarn_31.ecsv")
        settle(desk, 0.4)
        pixels = float(desk.root.tk.call("tk", "scaling"))
        room = min(desk.root.winfo_screenwidth() / 960, desk.root.winfo_screenheight() / 540)
        assert pixels <= max(room, 1.0) * 96 / 72 + 1e-9
        view = desk.elements
        for part in (view.rows["omega"].up, view.rows["omega"].entry, view.word, view.mass):
            right = part.winfo_rootx() + part.winfo_width()
            foot = part.winfo_rooty() + part.winfo_height()
            assert right <= view.winfo_rootx() + view.winfo_width()
            assert foot <= view.winfo_rooty() + view.winfo_height()
        for part in view.winfo_children():
            assert part.winfo_width() >= part.winfo_reqwidth() - 2
    finally:
        desk._end()


def test_lists_that_are_open_already_change_colours_too(looked_at: Desk) -> None:
    box = looked_at.table.filters.technique
    opened_list = f"{box.tk.call('ttk::combobox::PopdownWindow', box)}.f.l"
    assert str(box.tk.call(opened_list, "cget", "-background")) == LIGHT.paper
    press(looked_at, "Control-d")
    assert str(box.tk.call(opened_list, "cget", "-background")) == DARK.paper


@pytest.mark.parametrize(("geometry", "seen"), [
    ("800x600+10+10", True), ("800x600+-700+10", True), ("800x600+-790+10", False),
    ("800x600+5000+10", False), ("800x6000+10+10", False), ("", False)])  # fmt: skip
def test_a_window_is_not_put_where_nobody_sees_it(desk: Desk, geometry: str, seen: bool) -> None:
    assert on_screen(desk.root, geometry) is seen


def test_dark_and_light_colour_the_pictures_too(looked_at: Desk) -> None:
    desk = looked_at
    press(desk, "Control-d")
    settle(desk, 0.3)
    assert desk.palette is DARK
    corner = np.asarray(desk.sky.canvas.buffer_rgba())[2, 2, :3]
    assert "#" + "".join(f"{part:02X}" for part in corner) == DARK.ground
    assert desk.sky._curve.get_color() == DARK.curve
    assert to_hex(desk.sky.axes.spines["left"].get_edgecolor()).upper() == DARK.line
    assert {text.get_color() for text in desk.sky.axes.texts} == {DARK.ink}


# -- anything at all -------------------------------------------------------------------------------


def test_300_random_actions_leave_no_trace_and_no_hang(desk: Desk, tmp_path: Path) -> None:
    initial: Pair = invented_pair(40)
    opened(desk, initial, None)
    settle(desk, 0.4)
    user = RandomUser(desk, 11, tmp_path)
    user.act(300)
    desk.worker.cancel()
    settle(desk, 10.0, lambda: not desk.worker.busy)
    undo_all(desk)
    assert desk.model.pair is initial
    assert desk.model.pair == invented_pair(40)
    assert user.longest < 1.0, user.slowest
    assert min(user.done.values()) >= 1
