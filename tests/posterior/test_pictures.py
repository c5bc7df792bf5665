"""Figures and texts of a posterior."""

from __future__ import annotations

import argparse
from dataclasses import replace

import numpy as np
import pytest
from matplotlib.collections import LineCollection

from relorbit.cli import sample as verb
from relorbit.derive.posterior import sampled_ephemeris, summary
from relorbit.errors import InputError, Undetermined
from relorbit.show.corner_plot import corner_of_samples
from relorbit.show.files import figure_bytes
from relorbit.show.posterior_text import posterior_text, sampled_ephemeris_table
from relorbit.show.sampled_plots import ephemeris_bands, mass_histogram, sheaf_of_orbits
from relorbit.solve.residuals import residuals


def artists(figure, gid: str) -> list:
    return [one for one in figure.findobj() if one.get_gid() == gid]


def test_corner_has_a_panel_for_every_two(posterior):
    figure = corner_of_samples(posterior)
    assert len(figure.axes) == 64
    assert figure.axes[0].get_xlim()[0] > 45.0
    assert len(corner_of_samples(posterior, ("P", "e")).axes) == 4


def test_corner_of_a_node_at_zero_has_one_peak(posterior):
    shifted = replace(posterior, node=(posterior.node - np.median(posterior.node)) % 180.0)
    axes = corner_of_samples(shifted, ("node", "e")).axes[2]
    low, high = axes.get_xlim()
    assert high - low < 30.0
    # the scale is in degrees of the circle all the same
    assert axes.xaxis.get_major_formatter()(-2.0, 0) == "178"


def test_corner_has_figures_on_its_outer_scales_only(posterior):
    figure = corner_of_samples(posterior)
    figure.canvas.draw()

    def written(axis) -> list[str]:
        return [one.get_text() for one in axis.get_majorticklabels() if one.get_text()]

    for slot, axes in enumerate(figure.axes):
        row, column = divmod(slot, 8)
        assert bool(written(axes.xaxis)) == (row == 7), (row, column)
        assert bool(written(axes.yaxis)) == (column == 0 < row), (row, column)
        assert axes.xaxis.get_offset_text().get_text() == ""
        assert axes.yaxis.get_offset_text().get_text() == ""


def test_bands_cut_no_measure(covered, posterior):
    found = sampled_ephemeris(posterior, covered.measures.epoch[[0, -1]], 1000)
    far = residuals(posterior.best, covered.measures)
    far = replace(far, rho=far.rho + np.where(np.arange(len(far.rho)) == 3, 2.0, 0.0))
    (_, below) = sorted(ephemeris_bands(found, far).axes, key=lambda one: -one.get_position().y0)
    assert below.get_ylim()[1] > far.rho.max()
    assert below.get_xlim()[0] < far.epoch.min() < far.epoch.max() < below.get_xlim()[1]


def test_sheaf_draws_as_many_orbits_as_asked_for(covered, posterior):
    figure = sheaf_of_orbits(posterior, covered.measures, count=37, title=covered.name)
    (lines,) = artists(figure, "sheaf")
    assert isinstance(lines, LineCollection)
    curves = lines.get_segments()
    assert len(curves) == 37
    # every curve passes near the measures: within some errors of the first
    theta, rho = np.radians(covered.measures.theta[0]), covered.measures.rho[0]
    place = np.array([rho * np.sin(theta), rho * np.cos(theta)])
    assert max(np.hypot(*(curve - place).T).min() for curve in curves) < 0.1
    assert artists(figure, "measures unknown used")
    assert artists(figure, "primary")


def test_bands_are_nested_and_hold_the_median(covered, posterior):
    epochs = np.linspace(1970.0, 2060.0, 60)
    found = sampled_ephemeris(posterior, epochs, 1000)
    figure = ephemeris_bands(found, residuals(posterior.best, covered.measures))
    assert len(artists(figure, "band 68")) == len(artists(figure, "band 95")) == 2
    for narrow, wide in zip(artists(figure, "band 68"), artists(figure, "band 95"), strict=True):
        inner, outer = (one.get_paths()[0].get_extents() for one in (narrow, wide))
        assert outer.y0 <= inner.y0 < inner.y1 <= outer.y1
    (above, _) = artists(figure, "median")
    # theta runs on through north without a jump
    assert np.abs(np.diff(above.get_ydata())).max() < 90.0


def test_mass_histogram_marks_the_range_of_single_stars(posterior):
    figure = mass_histogram(posterior)
    assert artists(figure, "single stars")
    assert "total mass" in figure.axes[0].get_title()
    with pytest.raises(InputError, match="parallax"):
        mass_histogram(replace(posterior, parallax=None))


def test_too_few_samples_are_said_and_not_drawn(covered, posterior):
    few = replace(posterior, effective_size=5.0)
    for draw in (corner_of_samples, sheaf_of_orbits, mass_histogram):
        with pytest.raises(Undetermined, match="5 effective samples are too few"):
            draw(few)


@pytest.mark.parametrize("name", ["corner", "orbits", "bands", "masses"])
def test_the_command_line_draws_no_picture_of_too_few(posterior, tmp_path, name):
    path = tmp_path / "few.png"
    said = dict.fromkeys(verb.FIGURES) | {name: str(path), "pair": "none", "any_epoch": False}
    with pytest.raises(Undetermined, match="5 effective samples are too few"):
        verb._draw(argparse.Namespace(**said), replace(posterior, effective_size=5.0))
    assert not path.exists()


def test_the_same_samples_make_the_same_picture(posterior):
    one, other = (figure_bytes(sheaf_of_orbits(posterior, count=20), ".png") for _ in range(2))
    assert one == other


def test_text_says_medians_intervals_and_how_they_were_made(posterior):
    text = posterior_text(posterior, summary(posterior, 2025.0))
    for word in ("effective samples", "seed 1", "prior: uniform in ln P", "68 % from", "95 % from",
                 "total mass", "a^3/P^2", "next periastron", "widest on the sky"):  # fmt: skip
        assert word in text
    row = next(line for line in text.splitlines() if line.startswith("e  "))
    assert float(row.split()[1]) == pytest.approx(0.3, abs=0.02)


def test_text_lists_the_modes_with_their_probability(posterior):
    mode = (np.arange(len(posterior)) % 4 == 0).astype(np.intp)
    text = posterior_text(posterior, summary(replace(posterior, mode=mode), 2025.0))
    assert "separate parts" in text
    share = posterior.weight[mode == 0].sum()
    assert f"{100 * share:.3g}" in text


def test_ephemeris_table_has_medians_and_intervals(posterior):
    text = sampled_ephemeris_table(sampled_ephemeris(posterior, [2025.0, 2030.0]))
    lines = text.splitlines()
    assert len(lines) == 5
    assert "68 %" in lines[0]
    assert "from" in lines[1]
    numbers = [float(x) for x in lines[-1].split()[2:]]
    theta, low, high, lowest, highest = numbers[:5]
    assert lowest < low < theta < high < highest
