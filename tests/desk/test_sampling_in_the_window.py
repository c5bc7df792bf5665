"""All orbits that fit, in the window and in its model."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from astropy.table import Table
from desk.windows import dialogs, invented_pair, opened, press, settle
from matplotlib.collections import LineCollection

from relorbit.desk import sample_actions
from relorbit.desk.follows_view import NO_SAMPLES, OUTDATED
from relorbit.desk.model import DeskModel
from relorbit.desk.window import Desk
from relorbit.solve.sample import sample

PAIR = invented_pair(30)


@pytest.fixture(scope="module")
def posterior():
    return sample(PAIR, 400)


def sheaf(desk: Desk) -> list[LineCollection]:
    return [one for one in desk.sky.axes.collections if one.get_gid() == "sheaf"]


def sampled(desk: Desk) -> None:
    desk.commands.do("sample")
    settle(desk, 60.0, lambda: not desk.worker.busy)
    settle(desk, 0.3)


def test_samples_belong_to_the_measures_they_are_of(posterior) -> None:
    model = DeskModel(PAIR)
    assert model.samples is None and not model.samples_outdated
    assert model.keep_samples(posterior, "words", PAIR)
    assert model.samples is posterior and model.samples_text == "words"
    model.flip({3})
    assert model.samples is None and model.samples_outdated and model.samples_text == ""
    assert not model.keep_samples(posterior, "words", PAIR)
    model.undo()
    assert model.samples is posterior
    model.set_identity(parallax_mas=20.0)
    assert model.samples_outdated  # the masses were made with another parallax
    model.open(invented_pair(12), None)
    assert model.samples is None and not model.samples_outdated


def test_a_sheaf_on_the_sky_and_a_table(desk: Desk) -> None:
    opened(desk, PAIR)
    assert not sheaf(desk)
    assert not desk.commands.do("sheaf") and not desk.commands.do("save_samples")
    desk.follows.show_samples()
    assert desk.follows.samples.page.content == NO_SAMPLES
    press(desk, "F7")
    assert desk.worker.busy
    settle(desk, 60.0, lambda: not desk.worker.busy)
    settle(desk, 0.3)
    (drawn,) = sheaf(desk)
    assert len(drawn.get_segments()) == 60
    text = desk.follows.samples.page.content
    assert text.startswith("Invented 9: 100") and "next periastron" in text
    # the median of the table is that of the samples, and the truth is within its 95 %
    row = next(line.split() for line in text.splitlines() if line.startswith("P yr"))
    assert float(row[2]) == pytest.approx(np.median(desk.model.samples.P), abs=0.3)
    assert float(row[5]) < 47.3 < float(row[6])
    press(desk, "a")
    settle(desk, 0.3)
    assert not sheaf(desk)
    press(desk, "a")
    settle(desk, 0.3)
    assert sheaf(desk)
    desk.model.flip({0})
    settle(desk, 0.5)
    assert not sheaf(desk)
    assert desk.follows.samples.page.content == OUTDATED


def test_without_an_orbit_the_sky_holds_the_smaller_samples(desk: Desk) -> None:
    opened(desk, PAIR, None)
    settle(desk, 0.3)
    before = np.ptp(desk.sky.axes.get_ylim())
    sampled(desk)
    assert sheaf(desk) and desk.model.elements is None
    ends = np.concatenate(sheaf(desk)[0].get_segments())
    low, high = sorted(desk.sky.axes.get_ylim())
    assert np.mean((ends[:, 1] > low) & (ends[:, 1] < high)) > 0.9
    assert np.ptp(desk.sky.axes.get_ylim()) >= before


def test_samples_stop_when_asked_and_say_when_they_cannot_be(desk: Desk) -> None:
    opened(desk, PAIR)
    desk.commands.do("sample")
    desk.commands.do("stop")
    settle(desk, 30.0, lambda: not desk.worker.busy)
    assert desk.model.samples is None
    assert "Stopped" in desk.status.label["text"]
    one_night = PAIR.from_arrays([2000.0] * 4, [10, 11, 10, 11], [1.0] * 4)
    opened(desk, one_night, None)
    asked = []
    desk.ask = lambda title, words, buttons=("OK",): asked.append((title, words)) or "OK"
    sampled(desk)
    assert asked[0][0] == "Not sampled" and "one epoch" in asked[0][1]
    assert not dialogs(desk)


def test_files_of_the_samples(
    desk: Desk, posterior, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    opened(desk, PAIR)
    desk.model.keep_samples(posterior, "", PAIR)
    path = tmp_path / "samples.ecsv"
    monkeypatch.setattr(sample_actions.filedialog, "asksaveasfilename", lambda **_: str(path))
    assert desk.commands.do("save_samples")
    table = Table.read(path)
    assert len(table) == len(posterior) and "mass" in table.colnames
    names = list(desk.sampling.figures())
    assert len(names) == 4  # with a parallax there is a mass
    for number, name in enumerate(names):
        figure = tmp_path / f"{number}.png"
        desk.files.save_figure_as(name, str(figure))
        assert figure.read_bytes().startswith(b"\x89PNG")
