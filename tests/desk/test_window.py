"""A real window: what an observer does, from opening the example to the figure on disk."""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from desk.windows import answer, dialogs, press, settle, typed

from relorbit.desk import file_actions, orbit_actions
from relorbit.desk.file_actions import FIGURES
from relorbit.desk.window import Desk
from relorbit.errors import InputError
from relorbit.measures.store import read_pair
from relorbit.solve import solver
from relorbit.solve.solution import Solution


def solve(desk: Desk) -> None:
    press(desk, "F5")
    settle(desk, 30.0, lambda: not desk.worker.busy)
    settle(desk, 0.2)


def test_the_welcome_offers_ways_to_begin(desk: Desk) -> None:
    assert desk.welcome.winfo_viewable()
    assert not desk.panes.winfo_viewable()
    assert [button["text"].split(":")[0] for button in desk.welcome.examples] == [
        "Tarn 31", "Quill 8", "Moss 144", "Lantern 5", "Heron 77"]  # fmt: skip
    desk.welcome.examples[0].invoke()
    settle(desk, 0.3)
    assert desk.model.pair.name == "Tarn 31"
    assert desk.panes.winfo_viewable()


def test_a_first_time_user_solves_the_example(example: Desk) -> None:
    assert example.model.elements is None
    solve(example)
    # the elements it was made from stand in the README of the examples
    elements, sigma = example.model.elements, example.model.orbit.sigma
    assert abs(elements.P - 62.4) < 4 * sigma["P"]
    assert abs(elements.e - 0.42) < 4 * sigma["e"]
    row = example.elements.rows["P"]
    assert float(row.entry.get()) == pytest.approx(elements.P, abs=sigma["P"])
    assert row.error["text"].startswith("\u00b1")
    chi2 = example.model.consequences.chi2
    assert example.elements.chi2["text"] == f"\u03c7\u00b2 {chi2:.1f}"
    mass = example.model.orbit.mass_total
    said = example.elements.mass["text"].split()
    assert (said[0], said[2]) == ("mass", "\u00b1")
    assert float(said[1]) == pytest.approx(mass.value, abs=0.1 * mass.sigma)


def test_the_most_doubtful_measure_is_a_wrong_quadrant_that_f_puts_right(example: Desk) -> None:
    solve(example)
    good = example.model.consequences.chi2
    example.model.flip([17])
    solve(example)
    bad = example.model.consequences.chi2
    assert bad > 20 * good
    press(example, "w")
    assert example.model.selection == {17}
    assert "flipped" in example.table.tree.item(example.table._lines[17 - example.table.first],
                                                "values")  # fmt: skip
    press(example, "f")
    assert not example.model.pair.measures.flip[17]
    solve(example)
    assert example.model.consequences.chi2 == pytest.approx(good, rel=1e-6)


def test_a_bad_measure_is_set_aside_with_a_reason_and_undone(example: Desk) -> None:
    initial = example.model.pair
    example.model.edit_cell(30, "rho", "0.4")
    solve(example)
    press(example, "w")
    assert example.model.selection == {30}
    answer(example, "Set aside", reason="misread  circle")
    press(example, "x")
    measures = example.model.pair.measures
    assert not measures.use[30]
    assert measures.reason[30] == "misread circle"
    assert measures.rho[30] == 0.4
    assert "1 set aside" in example.bench.about["text"]
    for _ in range(3):
        press(example, "Control-z")
    assert example.model.pair is initial
    press(example, "Control-y")
    assert example.model.pair.measures.rho[30] == 0.4


def test_an_orbit_is_kept_and_saved(
    example: Desk, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    solve(example)
    answer(example, "Keep", name="my orbit", note="first try")
    press(example, "Control-k")
    assert example.root.title().startswith("\u2022 Tarn 31")
    path = tmp_path / "tarn.ecsv"
    monkeypatch.setattr(file_actions.filedialog, "asksaveasfilename", lambda **_: str(path))
    press(example, "Control-s")
    assert example.root.title() == "Tarn 31 \u2013 tarn.ecsv \u2013 relorbit"
    kept = read_pair(path).orbit("my orbit")
    assert kept.elements == example.model.elements
    assert kept.note == "first try"
    assert kept.sigma["P"] == pytest.approx(example.model.orbit.sigma["P"])


def test_a_name_that_is_missing_is_said_in_the_form(example: Desk) -> None:
    solve(example)
    said = []
    answer(example, "Keep", then=lambda form: said.append(form.wrong["text"]), name=" ")
    press(example, "Control-k")
    assert said == ["An orbit on record needs a name"]
    assert not example.model.pair.orbits


@pytest.mark.parametrize(("which", "suffix"), list(zip(FIGURES, ("png", "svg", "pdf", "png"),
                                                       strict=True)))  # fmt: skip
def test_figures_are_written(
    example: Desk, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, which: str, suffix: str
) -> None:
    solve(example)
    path = tmp_path / f"figure.{suffix}"
    monkeypatch.setattr(file_actions.filedialog, "asksaveasfilename", lambda **_: str(path))
    answer(example, "Choose a name\u2026", which=which)
    press(example, "Control-g")
    start = {"png": b"\x89PNG", "svg": b"<?xml", "pdf": b"%PDF"}[suffix]
    assert path.read_bytes().startswith(start)
    assert path.stat().st_size > 5000


def test_a_sheet_of_an_orbit_by_hand_is_written(example: Desk, tmp_path: Path) -> None:
    for name, text in zip(example.elements.rows, ("62", "1978", "0.4", "1.8", "50", "70", "215"),
                          strict=True):  # fmt: skip
        typed(example, example.elements.rows[name].entry, text)
    assert example.model.elements.P == 62.0
    example.files.save_figure_as(FIGURES[3], str(tmp_path / "sheet.pdf"))
    assert (tmp_path / "sheet.pdf").read_bytes().startswith(b"%PDF")


def test_a_figure_of_an_unknown_kind_is_refused_in_words(example: Desk, tmp_path: Path) -> None:
    solve(example)
    said = answer(example, "OK")
    example.files.save_figure_as(FIGURES[0], str(tmp_path / "figure.gif"))
    assert "a figure is written as .png, .pdf or .svg" in said[0]
    assert not list(tmp_path.iterdir())


def test_alternatives_are_stepped_through(example: Desk) -> None:
    example.model.flip([4])  # a wrong quadrant leaves several orbits, all of them bad
    solve(example)
    found = example.model.state.found
    assert found.alternatives
    press(example, "bracketright")
    assert example.model.elements == found.alternatives[0].elements
    settle(example, 0.4)
    lines = example.follows.orbits.tree.get_children()
    assert example.follows.orbits.tree.item(lines[1], "tags") == ("here",)
    press(example, "bracketleft")
    assert example.model.elements == found.elements


def test_what_cannot_be_determined_is_said_and_one_of_many_can_be_looked_at(desk: Desk) -> None:
    desk.files.open_example("tarn_31.ecsv")
    desk.model.set_use(range(8, 60), False, "to leave a short arc")
    said = answer(desk, "Look at one of many")
    press(desk, "F5")
    settle(desk, 30.0, lambda: not desk.worker.busy and not dialogs(desk))
    assert said[0].startswith("Not determined:")
    assert desk.model.elements is not None
    assert desk.model.undo_label == "take up one of many orbits"


@pytest.fixture
def slow(monkeypatch: pytest.MonkeyPatch) -> None:
    """Solving takes some seconds, as on many measures."""

    def solve_slowly(*given: object, on_progress: Callable[[float], None]) -> Solution:
        for share in np.linspace(0.0, 0.9, 100):
            on_progress(share)
            time.sleep(0.03)
        return solver.solve(*given, on_progress=on_progress)

    monkeypatch.setattr(orbit_actions, "solve", solve_slowly)


def test_work_shows_its_progress_while_the_window_goes_on(example: Desk, slow: None) -> None:
    press(example, "F5")
    settle(example, 5.0, lambda: example.bench._bar["value"] > 0.1)
    press(example, "Down")
    assert len(example.model.selection) == 1
    assert not example.commands.do("solve")
    assert example.worker.busy


def test_measures_changed_meanwhile_leave_the_orbit_without_errors(
    example: Desk, slow: None
) -> None:
    press(example, "F5")
    example.model.flip([3])
    settle(example, 20.0, lambda: not example.worker.busy)
    assert example.model.elements is not None
    assert example.model.orbit is example.model.elements
    assert "Refine from here" in example.status.label["text"]


def test_solving_can_be_cancelled_and_changes_nothing(example: Desk, slow: None) -> None:
    press(example, "F5")
    assert example.bench._work.winfo_manager()
    assert example.commands.do("stop")
    settle(example, 20.0, lambda: not example.worker.busy)
    assert example.model.elements is None
    assert not example.bench._work.winfo_manager()
    assert example.status.label["text"] == "Stopped; nothing was changed."


def test_a_cancel_counts_even_when_the_work_was_just_done(example: Desk) -> None:
    assert example.commands.do("solve")
    assert example.worker.wait(30.0)
    assert example.commands.do("stop")
    settle(example, 5.0, lambda: not example.worker.busy)
    assert example.model.elements is None
    assert example.model.undo_label is None


def test_closing_in_mid_work_asks_and_ends(example: Desk, slow: None) -> None:
    press(example, "F5")
    said = answer(example, "Let it go on")
    example.close()
    assert said == ["Solving is still going on. Stop it?"]
    assert not example._closing
    answer(example, "Stop it")
    example.close()
    assert example._closing
    assert example.worker.wait(0.0)


def test_unsaved_changes_are_asked_about(example: Desk) -> None:
    example.model.flip([3])
    said = answer(example, "Cancel")
    example.close()
    assert said == ["Tarn 31 has unsaved changes."]
    assert not example._closing


def test_a_held_element_keeps_its_value(example: Desk) -> None:
    solve(example)
    typed(example, example.elements.rows["P"].entry, "60")
    example.elements.rows["P"].check.invoke()
    press(example, "F6")
    settle(example, 20.0, lambda: not example.worker.busy)
    assert example.model.elements.P == 60.0
    assert example.model.orbit.sigma["P"] is None
    assert example.model.orbit.sigma["e"] > 0.0


def test_wrong_values_of_elements_are_explained(example: Desk) -> None:
    solve(example)
    row, before = example.elements.rows["e"], example.model.elements
    typed(example, row.entry, "1.2")
    assert example.elements.word["text"] == "e: e must be in 0 <= e < 1, not 1.2"
    assert row.entry["style"] == "Wrong.TEntry"
    assert row.entry.get() == "1.2"
    typed(example, row.entry, "much")
    assert "'much' is not a number" in example.elements.word["text"]
    assert example.model.elements is before


def test_arrow_keys_nudge_coarsely_and_finely(example: Desk) -> None:
    solve(example)
    start = example.model.elements
    entry = example.elements.rows["e"].entry
    entry.focus_force()
    entry.event_generate("<Up>")
    assert example.model.elements.e == pytest.approx(start.e + 0.01)
    entry.event_generate("<Shift-Down>")
    assert example.model.elements.e == pytest.approx(start.e + 0.009)
    settle(example, 0.1)
    assert float(entry.get()) == pytest.approx(start.e + 0.009, abs=1e-4)
    press(example, "Control-z")  # nudges in a row are one step
    assert example.model.elements == start


def test_copied_rows_can_be_pasted_back(example: Desk) -> None:
    example.model.select({3, 5})
    press(example, "Control-c")
    text = example.root.clipboard_get()
    assert text.count("\n") == 3 and text.startswith("epoch")
    example.model.remove({3, 5})
    said = answer(example, "OK")
    press(example, "Control-v")
    assert len(example.model.pair.measures) == 60
    assert "2" in said[0]


def test_garbage_on_the_clipboard_is_refused_in_words(example: Desk) -> None:
    before = example.model.pair
    example.put_on_clipboard("epoch theta rho\n1950.1 400 1.2\n")
    said = answer(example, "OK")
    press(example, "Control-v")
    assert "line 2" in said[0] and "outside [0, 360)" in said[0]
    assert example.model.pair is before


def test_a_measure_is_added_by_the_form(example: Desk) -> None:
    wrong = []
    answer(example, "Add", then=lambda form: wrong.append(form.wrong["text"]), epoch="2026.5",
           theta="370", rho="1.2")  # fmt: skip
    press(example, "Insert")
    assert "370 is outside [0, 360)" in wrong[0]
    answer(example, "Add", epoch="2026-07-02", theta="160,5", rho="1.2", equinox="J2000")
    press(example, "Insert")
    measures = example.model.pair.measures
    assert len(measures) == 61
    assert measures.theta[60] == 160.5
    assert measures.epoch[60] == pytest.approx(2026.5, abs=0.01)
    assert example.model.selection == {60}


def test_the_pair_is_described_and_the_mass_follows(example: Desk) -> None:
    solve(example)
    before = example.model.consequences.mass
    answer(example, "Take over", parallax_mas="47,5")
    press(example, "Control-i")
    assert example.model.consequences.mass == pytest.approx(8.0 * before)
    assert "47.5 mas" in example.elements.parallax["text"]


def test_a_file_changed_by_another_window_is_not_overwritten(example: Desk, tmp_path: Path) -> None:
    path = tmp_path / "pair.ecsv"
    example.session.save(path)
    other = read_pair(path).with_identity(note="from another window")
    other.write(path)
    settle(example, 4.0, lambda: "changed on disk" in example.status.label["text"])
    example.model.flip([2])
    said = answer(example, "Cancel")
    press(example, "Control-s")
    assert "changed on disk" in said[0]
    assert read_pair(path).note == "from another window"
    answer(example, "Overwrite it")
    press(example, "Control-s")
    assert read_pair(path).measures.flip[2]


def test_a_full_disk_is_said_and_the_work_stays(
    example: Desk, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    example.session.save(tmp_path / "pair.ecsv")
    example.model.flip([2])

    def full(*_: object, **__: object) -> None:
        raise InputError("not written: the disk is full; make room or choose another place",
                         path="pair.ecsv")  # fmt: skip

    monkeypatch.setattr("relorbit.desk.session.write_text_atomically", full)
    said = answer(example, "OK")
    press(example, "Control-s")
    assert "the disk is full" in said[0] and "stays on the desk" in said[0]
    assert example.model.unsaved
    assert example.model.pair.measures.flip[2]


def test_a_bad_file_is_refused_in_the_words_of_the_store(desk: Desk, tmp_path: Path) -> None:
    path = tmp_path / "bad.csv"
    path.write_text("epoch,theta,rho\n1950.0,12.0,1.0\n1951.0,400.0,1.0\n", encoding="utf-8")
    with pytest.raises(InputError) as refused:
        read_pair(path)
    said = answer(desk, "OK")
    desk.files.open_path(path)
    assert said == [str(refused.value)]
    assert desk.welcome.winfo_viewable()


def test_unsaved_work_of_a_crash_is_offered(desk: Desk, monkeypatch: pytest.MonkeyPatch) -> None:
    desk.files.open_example("tarn_31.ecsv")
    desk.model.flip([3])
    left = desk.model.pair
    found = object.__new__(type("Left", (), {"written": 1.7e9, "path": None,
                                             "file_is_newer": True}))  # fmt: skip
    monkeypatch.setattr(desk.session, "found", lambda: [found])
    restored = []
    monkeypatch.setattr(desk.session, "restore", restored.append)
    said = answer(desk, "Restore")
    desk.files.offer_rescue()
    assert restored == [found]
    assert "did not end as it should" in said[0] and "changed since" in said[0]
    assert desk.model.pair is left


def test_a_fault_is_written_down_and_the_window_lives_on(
    desk: Desk, monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    monkeypatch.setattr("tempfile.tempdir", str(tmp_path))
    desk.files.open_example("tarn_31.ecsv")
    desk.root.report_callback_exception = desk._fault

    def broken() -> None:
        raise ZeroDivisionError("invented fault")

    said = answer(desk, "OK")
    desk.root.after(1, broken)
    settle(desk, 5.0, lambda: bool(said))
    settle(desk, 0.2)
    assert not dialogs(desk)
    file = next(tmp_path.glob("relorbit-fault-*.txt"))
    assert "invented fault" in file.read_text(encoding="utf-8")
    assert str(file) in said[0]
    solve(desk)
    assert desk.model.elements is not None


def test_every_command_is_in_a_menu_and_no_key_is_used_twice(desk: Desk) -> None:
    labels = []
    for title in ("File", "Edit", "Measures", "Orbit", "View", "Help"):
        menu = desk.commands._menus[title]
        for index in range(menu.index("end") + 1):
            labels.append(menu.entrycget(index, "label"))
    assert {one.label for one in desk.commands.all} <= set(labels)
    keys = [one.key for one in desk.commands.all]
    assert all(keys)
    assert len(keys) == len(set(keys))


def test_the_settings_remember_dark_orientation_and_dividers(example: Desk) -> None:
    press(example, "Control-d")
    press(example, "o")
    settle(example, 0.2)  # a divider is dragged in a window that is drawn
    example.panes.upper.sashpos(0, 333)
    folder = example.settings.folder
    example.close()
    from relorbit.desk.settings import Settings

    again = Settings.load(folder)
    assert again.dark and again.orientation == "eyepiece"
    assert again.panes["upper 0"] == pytest.approx(333 / 1224, abs=0.01)
    assert again.geometry.startswith("1240x740")


def test_the_ephemeris_follows_what_is_asked(example: Desk, tmp_path: Path,
                                             monkeypatch: pytest.MonkeyPatch) -> None:  # fmt: skip
    solve(example)
    example.follows.tabs.select(2)
    settle(example, 0.3)
    page = example.follows.ephemeris
    for name, text in (("from", "2030"), ("to", "2031"), ("step", "6 months")):
        page.fields[name].delete(0, "end")
        page.fields[name].insert(0, text)
    page.fields["step"].focus_force()
    example.root.update()
    page.fields["step"].event_generate("<KeyRelease>", keysym="s")
    assert "2030.500" in page.page.content and "2031.000" in page.page.content
    assert "periastron" in page.page.content
    path = tmp_path / "ephemeris.txt"
    monkeypatch.setattr(file_actions.filedialog, "asksaveasfilename", lambda **_: str(path))
    example.commands.do("save_ephemeris")
    assert "2030.500" in path.read_text(encoding="utf-8")
    page.fields["step"].insert("end", " ago")
    page.fields["step"].event_generate("<KeyRelease>", keysym="o")
    assert "is not a length of time" in page.wrong["text"]
    settle(example, 0.1)
    assert page.wrong.winfo_viewable()


def test_the_date_moves_the_companion(example: Desk) -> None:
    solve(example)
    typed(example, example.sky.dates.field, "2030-01-01")
    from relorbit.orbit.elements import positions

    theta, rho = positions(example.model.elements, np.array([example.model.epoch]))
    angle = np.radians(theta[0])
    x, y = example.sky._companion.get_data()
    assert (x[0], y[0]) == pytest.approx((rho[0] * np.sin(angle), rho[0] * np.cos(angle)))
    assert example.model.epoch == pytest.approx(2030.0, abs=0.01)
    before = example.model.epoch
    typed(example, example.sky.dates.field, "someday")
    assert example.model.epoch == before
    assert "someday" in example.sky.dates.place["text"]

