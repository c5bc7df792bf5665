"""The sheet, and every figure as PNG, PDF and SVG on disk."""

import subprocess
import sys
from dataclasses import replace

import matplotlib
import numpy as np
import pytest
from invented_pairs import INVENTED, solution_of
from matplotlib.backends.backend_agg import FigureCanvasAgg

from relorbit.derive.ephemeris import ephemeris, turning_points
from relorbit.errors import InputError
from relorbit.show.files import check_format, figure_bytes, save_figure
from relorbit.show.orbit_plot import apparent_orbit
from relorbit.show.residual_plot import residuals_over_time
from relorbit.show.sheet import sheet
from relorbit.show.time_plot import over_time

STARTS = {".png": b"\x89PNG\r\n\x1a\n", ".pdf": b"%PDF-", ".svg": b"<?xml"}


def page(solution, pair, years=16):
    epochs = np.arange(2026.0, 2026.0 + years)
    return sheet(solution, pair, ephemeris(solution, epochs), turning_points(solution, 2026.0))


def words(figure):
    return [text.get_text() for text in figure.texts]


def current_settings():
    """Every setting of matplotlib but the backend, which is chosen when it is first looked at."""
    return {name: matplotlib.rcParams[name] for name in matplotlib.rcParams if name != "backend"}


@pytest.fixture
def figures(solution, pair):
    return {
        "orbit": lambda: apparent_orbit(INVENTED, pair.measures, title="Invented 1"),
        "time": lambda: over_time(INVENTED, pair.measures),
        "residuals": lambda: residuals_over_time(solution.residuals),
        "sheet": lambda: page(solution, pair),
    }


@pytest.mark.parametrize("suffix", STARTS)
@pytest.mark.parametrize("name", ["orbit", "time", "residuals", "sheet"])
def test_same_input_same_bytes(figures, tmp_path, name, suffix):
    first, second = tmp_path / f"a{suffix}", tmp_path / f"b{suffix.upper()}"
    settings = current_settings()
    save_figure(figures[name](), first)
    save_figure(figures[name](), second)
    assert first.read_bytes() == second.read_bytes()
    assert first.read_bytes().startswith(STARTS[suffix]) and first.stat().st_size > 10_000
    assert current_settings() == settings
    assert sorted(path.name for path in tmp_path.iterdir()) == [first.name, second.name]


def test_a_png_is_sharp_and_not_blank(figures, tmp_path):
    save_figure(figures["sheet"](), tmp_path / "sheet.png")
    image = matplotlib.image.imread(tmp_path / "sheet.png")
    assert image.shape[:2] == (2338, 1654)  # A4 at 200 dots an inch
    ink = (image[..., :3].mean(axis=-1) < 0.5).mean()
    assert 0.005 < ink < 0.2


@pytest.mark.parametrize("name", ["orbit.jpg", "orbit", "orbit.ecsv"])
def test_another_suffix_is_refused_before_anything_is_written(tmp_path, name):
    with pytest.raises(InputError, match=r"a figure is written as \.png, \.pdf or \.svg"):
        save_figure(apparent_orbit(INVENTED), tmp_path / name)
    assert list(tmp_path.iterdir()) == []
    assert check_format("a/b.SVG") == ".svg"


def test_a_folder_that_is_not_there_is_named(tmp_path):
    with pytest.raises(InputError, match="there is no folder"):
        save_figure(apparent_orbit(INVENTED), tmp_path / "none" / "orbit.png")


def test_nothing_imports_pyplot():
    code = (
        "import sys, relorbit.show.sheet, relorbit.show.time_plot, relorbit.show.files as files;"
        "from relorbit.show.orbit_plot import apparent_orbit;"
        "from relorbit.orbit.elements import Elements;"
        "files.figure_bytes(apparent_orbit(Elements(60, 1950, .4, .8, 50, 40, 110)), '.png');"
        "print('matplotlib.pyplot' in sys.modules)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout == "False\n"


def test_the_sheet_holds_the_results(solution, pair):
    figure = page(solution, replace(pair, designations=("Other name",)))
    told = words(figure)
    assert figure.get_size_inches() == pytest.approx((8.27, 11.69)) and len(figure.axes) == 3
    assert "Invented 1" in told and "total mass 5.05 \u00b1 0.20 solar masses" in told
    assert "Other name, 12h 29m 12.0s  \u221212\u00b0 24\u2032 00\u2033 (J2000)" in told
    assert "magnitudes 6.10 and 7.40, parallax 31.20 \u00b1 0.40 mas" in told
    assert "scaled \u03c3 = formal \u00d7 1.30" in told
    # a cell is padded with spaces of a figure's width
    cells = [cell.strip("\u2007\u2008 ") for cell in told]
    for value in ("62.40", "1951.37", "0.4300", "47.20", "2026.000", "2026-01-01", "2076.17"):
        assert value in cells
    assert "and 5 more epochs, not printed here" in told
    assert any("a sentence that an observer should read" in line for line in told)
    assert any("north up, east left" in line for line in told)


def test_the_sheet_without_errors_scaled_parallax_or_ephemeris(pair):
    bare = solution_of(INVENTED, replace(pair, parallax_mas=None, parallax_err_mas=None))
    told = words(sheet(bare, orientation="eyepiece"))
    assert "total mass not known: no parallax" in told and "formal" not in told
    assert any("south up, west left" in line for line in told)
    assert not any("and" in line and "epochs" in line for line in told)


def test_too_many_notes_are_not_run_over_the_foot(solution, pair):
    figure = sheet(solution, pair, notes=["a long note " * 20] * 9)
    assert "\u2022 more notes in the text report" in words(figure)


@pytest.mark.parametrize("elements", [INVENTED, replace(INVENTED, i=89.9),
                                      replace(INVENTED, i=85.0, node=0.0, a=0.04)])  # fmt: skip
def test_nothing_on_the_sheet_overlaps_or_is_cut(elements, simulated, pair):
    measures = simulated(elements, 70, scale=0.3 * elements.a)
    solution = solution_of(elements, pair.with_measures(measures), error_scale=1.2)
    figure = page(solution, pair)
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    renderer = canvas.get_renderer()
    boxes = [(t.get_text(), t.get_window_extent(renderer)) for t in figure.texts if t.get_text()]
    boxes += [("axes", axes.get_tightbbox(renderer)) for axes in figure.axes]
    boxes.append(("legend", figure.legends[0].get_window_extent(renderer)))
    foot = 0.48 / 11.69 * figure.bbox.height
    for slot, (text, box) in enumerate(boxes):
        assert text.startswith("Picture:") or box.y0 > foot, text
        assert figure.bbox.x0 < box.x0 and box.x1 < figure.bbox.x1, text
        assert figure.bbox.y0 < box.y0 and box.y1 < figure.bbox.y1, text
        for other, second in boxes[slot + 1 :]:
            if box.width > 0 and second.width > 0 and "axes" not in (text, other):
                wide = min(box.x1, second.x1) - max(box.x0, second.x0)
                tall = min(box.y1, second.y1) - max(box.y0, second.y0)
                assert wide < 1.0 or tall < 3.0, (text, other)


def test_an_open_figure_can_be_saved_while_it_is_shown(figures, tmp_path):
    figure = figures["orbit"]()
    before = figure_bytes(figure, ".png")
    FigureCanvasAgg(figure).draw()
    assert figure_bytes(figure, ".png") == before
