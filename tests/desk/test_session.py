"""Opening, saving, two windows on one file, taking measures in, and texts out."""

from __future__ import annotations

import os
import shutil
import stat
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from desks import EXAMPLE_FOLDER, ORBIT, new_session, pair, pair_file

from relorbit.desk import watch
from relorbit.desk.session import CHANGED, EXAMPLES, UNCHANGED, VANISHED, ChangedOnDisk
from relorbit.errors import InputError
from relorbit.measures.pair import RecordedOrbit
from relorbit.measures.store import read_pair

ROOT = Path(__file__).resolve().parents[2]
LIST = "epoch,theta,rho\n1990.5,10.0,1.0\n1991.5,12.0,1.1\n"
# the limit of the size of files stops a write half way, as a full disk does
FULL_DISK = """
import resource, sys
from pathlib import Path
from relorbit.desk.model import DeskModel
from relorbit.desk.session import Session
from relorbit.desk.settings import Settings
from relorbit.errors import InputError
session = Session(DeskModel(), Settings(Path(sys.argv[2])))
session.open_file(sys.argv[1])
session.model.edit_cell(0, "rho", "1.25")
usual = resource.getrlimit(resource.RLIMIT_FSIZE)
resource.setrlimit(resource.RLIMIT_FSIZE, (500, usual[1]))
try:
    session.save()
except InputError as error:
    print(error)
print(session.tick(0.0))
print(session.tick(10.0))
print(session.model.unsaved, session.model.pair.measures.rho[0])
resource.setrlimit(resource.RLIMIT_FSIZE, usual)
print(session.tick(20.0))
session.save()
print(session.model.unsaved)
"""


@pytest.fixture
def session(tmp_path):
    session = new_session(tmp_path)
    yield session
    session.close()


# -- opening and saving ----------------------------------------------------------------------------


def test_open_edit_save_and_open_again(session, tmp_path):
    path = pair_file(tmp_path)
    session.open_file(path)
    assert session.model.pair == pair() and session.model.path == path
    assert not session.model.unsaved and not session.needs_name
    assert session.settings.recent == (str(path),)
    session.model.edit_cell(0, "rho", "1.25")
    assert session.save() == path
    assert not session.model.unsaved and session.changed_on_disk() == UNCHANGED
    assert read_pair(path) == session.model.pair
    assert read_pair(f"{path}.previous") == pair()


def test_what_cannot_be_opened_leaves_the_desk_alone(session, tmp_path):
    path = pair_file(tmp_path)
    session.open_file(path)
    session.model.flip([0])
    before = session.model.state
    broken = tmp_path / "broken.csv"
    broken.write_text("epoch,theta,rho\n1990.5,400,1\n")
    with pytest.raises(InputError, match=r"broken.csv, line 2, column theta: 400 is outside"):
        session.open_file(broken)
    with pytest.raises(InputError, match="no such file; check the name and the folder"):
        session.open_file(tmp_path / "none.ecsv")
    assert session.model.state is before and session.model.path == path
    assert session.settings.recent == (str(path),)
    session.save()


def test_a_plain_list_stays_as_it_is(session, tmp_path):
    path = tmp_path / "list.csv"
    path.write_text(LIST)
    session.open_file(path)
    assert session.needs_name and session.suggested_path() == tmp_path / "list.ecsv"
    session.model.flip([0])
    words = "list.csv: is not a pair file and stays as it is; save the pair under another name, such as list.ecsv"  # noqa: E501
    for ways in ({}, {"path": path}, {"path": path, "force": True}):
        with pytest.raises(InputError) as caught:
            session.save(**ways)
        assert str(caught.value).endswith(words)
    assert path.read_text() == LIST and session.model.unsaved
    saved = session.save(session.suggested_path())
    assert saved == session.model.path == session.suggested_path() and not session.needs_name
    session.model.flip([1])
    session.save()
    assert read_pair(saved).measures.flip.tolist() == [True, True]


def test_a_picture_is_not_overwritten_but_an_empty_file_is(session, tmp_path):
    session.new_pair("Invented 4")
    (tmp_path / "orbit.png").write_bytes(b"\x89PNG\x00")
    with pytest.raises(InputError, match="is not a pair file and stays as it is"):
        session.save(tmp_path / "orbit.png")
    (tmp_path / "empty.ecsv").touch()
    session.save(tmp_path / "empty.ecsv")
    assert read_pair(tmp_path / "empty.ecsv").name == "Invented 4"


def test_a_new_pair_needs_a_name(session, tmp_path):
    session.new_pair("Invented 4 AB, no file")
    assert session.needs_name
    assert session.suggested_path() == Path("Invented_4_AB_no_file.ecsv")
    with pytest.raises(InputError, match="the pair has no file yet; save it under a name"):
        session.save()
    with pytest.raises(InputError, match="the pair has no file yet"):
        session.reload()
    assert session.changed_on_disk() == UNCHANGED
    session.model.add_measure("2020.5", "10", "1")
    session.save(tmp_path / "four.ecsv")
    assert read_pair(tmp_path / "four.ecsv") == session.model.pair
    with pytest.raises(InputError, match="not written: there is no folder"):
        session.save(tmp_path / "none" / "four.ecsv")
    assert session.model.path == tmp_path / "four.ecsv"


@pytest.mark.parametrize("name", [name for name, _ in EXAMPLES])
def test_examples_open_as_pairs_without_a_file(session, name):
    session.open_example(name)
    assert len(session.model.pair.measures) > 10
    assert session.needs_name and session.model.path is None and not session.settings.recent


# -- the file changes while it is open -------------------------------------------------------------


def test_two_windows_on_one_file(tmp_path):
    path = pair_file(tmp_path)
    one, two = new_session(tmp_path), new_session(tmp_path)
    one.open_file(path)
    two.open_file(path)
    one.model.edit_cell(0, "note", "of one")
    two.model.edit_cell(1, "note", "of two")
    one.save()
    assert one.changed_on_disk() == UNCHANGED
    assert two.changed_on_disk() == CHANGED
    with pytest.raises(ChangedOnDisk, match=r"invented_1.ecsv: has been changed on disk"):
        two.save()
    with pytest.raises(ChangedOnDisk):
        two.save(path)
    assert read_pair(path) == one.model.pair and two.model.unsaved
    two.save(tmp_path / "mine.ecsv")
    assert two.changed_on_disk() == UNCHANGED
    with pytest.raises(ChangedOnDisk):
        new = new_session(tmp_path)
        new.open_file(path)
        one.model.flip([0])
        one.save()
        new.save()
    new.save(force=True)
    assert read_pair(path) == new.model.pair
    assert one.changed_on_disk() == CHANGED
    for session in (one, two, new):
        session.close()


def test_reload_takes_the_others_work_and_undo_ones_own(session, tmp_path):
    path = pair_file(tmp_path)
    session.open_file(path)
    session.model.edit_cell(0, "note", "mine")
    mine = session.model.pair
    pair(4).write(path)
    session.reload()
    assert session.model.pair == pair(4) and not session.model.unsaved
    assert session.changed_on_disk() == UNCHANGED
    session.model.undo()
    assert session.model.pair is mine and session.model.unsaved
    session.save()
    assert read_pair(path) == mine


def test_a_file_of_one_content_is_unchanged_whatever_its_date(session, tmp_path):
    path = pair_file(tmp_path)
    session.open_file(path)
    content = path.read_bytes()
    path.write_bytes(content)
    os.utime(path, (1e9, 1e9))
    assert session.changed_on_disk() == UNCHANGED
    path.write_bytes(content.replace(b"Finch", b"Robin"))
    os.utime(path, (1e9, 1e9))  # same size and date: another program kept them
    shutil.copy(path, tmp_path / "new")
    os.replace(tmp_path / "new", path)
    assert session.changed_on_disk() == CHANGED
    path.write_bytes(content)
    assert session.changed_on_disk() == UNCHANGED


def test_a_change_within_one_tick_of_the_clock_is_seen(session, tmp_path, monkeypatch):
    """Same size, same date, same place on the disk, soon after the file was written."""
    monkeypatch.setattr(watch, "COARSEST_CLOCK_S", 60.0)
    path = pair_file(tmp_path)
    session.open_file(path)
    assert session.changed_on_disk() == UNCHANGED
    about = path.stat()
    path.write_bytes(path.read_bytes().replace(b"Finch", b"Robin"))
    os.utime(path, ns=(about.st_atime_ns, about.st_mtime_ns))
    assert session.changed_on_disk() == CHANGED


def test_an_old_file_is_not_read_every_second(session, tmp_path, monkeypatch):
    path = pair_file(tmp_path)
    os.utime(path, (1e9, 1e9))
    session.open_file(path)
    assert session.changed_on_disk() == UNCHANGED

    def reads(_):
        raise AssertionError("the file is read though nothing has changed")

    monkeypatch.setattr(Path, "read_bytes", reads)
    assert session.changed_on_disk() == UNCHANGED


def test_a_file_that_vanished_can_be_saved_anew(session, tmp_path):
    folder = tmp_path / "stick"
    folder.mkdir()
    path = pair_file(folder)
    session.open_file(path)
    shutil.rmtree(folder)
    assert session.changed_on_disk() == VANISHED
    with pytest.raises(InputError, match="not written: there is no folder"):
        session.save()
    with pytest.raises(InputError, match="no such file"):
        session.reload()
    assert session.model.pair == pair()
    folder.mkdir()
    session.save()
    assert read_pair(path) == pair() and session.changed_on_disk() == UNCHANGED


def test_a_link_and_its_file_are_one(session, tmp_path):
    path = pair_file(tmp_path)
    (tmp_path / "link.ecsv").symlink_to(path)
    session.open_file(tmp_path / "link.ecsv")
    pair(4).write(path)
    with pytest.raises(ChangedOnDisk):
        session.save(path)


def test_read_only(session, tmp_path):
    path = pair_file(tmp_path)
    session.open_file(path)
    session.model.flip([0])
    path.chmod(stat.S_IREAD)
    with pytest.raises(InputError, match="not written: the file is read-only"):
        session.save()
    assert session.model.unsaved and session.model.pair.measures.flip[0]


@pytest.mark.skipif(os.name != "posix", reason="limits of POSIX")
def test_full_disk_keeps_the_work(tmp_path):
    path = pair_file(tmp_path)
    done = subprocess.run(
        [sys.executable, "-c", FULL_DISK, path, tmp_path / "config"],
        capture_output=True, text=True, env={**os.environ, "PYTHONPATH": str(ROOT)},
    )  # fmt: skip
    assert done.stderr == ""
    full = "not written: the file is too large for this disk; make room or choose another place"
    saving, keeping, again, kept, better, unsaved = done.stdout.splitlines()
    assert saving == f"{path}: {full}"
    assert keeping.startswith("unsaved work cannot be kept safe: ") and keeping.endswith(full)
    assert again == "None", "said once, not every few seconds"
    assert kept == "True 1.25"
    assert (better, unsaved) == ("unsaved work is kept safe again", "False")
    assert read_pair(path).measures.rho[0] == 1.25


# -- taking measures in ----------------------------------------------------------------------------


def test_a_paste_is_one_step_and_reduced_where_the_position_is_known(session):
    session.new_pair("Invented 5")
    session.model.set_identity(ra_deg=231.55, dec_deg=41.22)
    first = session.model.pair
    taken = session.paste("1950.5 100.0 2.0\n1960.5 110.0 2.1\n", equinox="date")
    assert (taken.read, taken.appended, taken.reduced) == (2, 2, 2)
    assert "theta of 2 measures brought to equinox J2000" in taken.text
    m = session.model.pair.measures
    assert m.theta_obs.tolist() == [100.0, 110.0] and set(m.equinox) == {"J2000"}
    # precession in position angle: 0.00557 deg/yr sin(RA) / cos(dec), the usual formula
    turn = 0.00557 * np.sin(np.radians(231.55)) / np.cos(np.radians(41.22)) * 49.5
    assert m.theta[0] - 100.0 == pytest.approx(turn, abs=0.01)
    assert session.model.undo_label == "paste measures"
    session.model.undo()
    assert session.model.pair is first


def test_a_paste_at_j2000_is_left_alone(session):
    session.new_pair("Invented 5")
    session.model.set_identity(ra_deg=231.55, dec_deg=41.22)
    taken = session.paste("1950.5 100.0 2.0\n", equinox="J2000")
    assert taken.reduced == 0 and session.model.pair.measures.theta[0] == 100.0


def test_a_position_entered_later(session):
    session.new_pair("Invented 5")
    taken = session.paste("1950.5 100.0 2.0\n", equinox="date")
    assert "enter right ascension and declination" in taken.text and "--ra" not in taken.text
    assert session.reduce() == 0 and session.model.undo_label == "paste measures"
    session.model.set_identity(ra_deg=231.55, dec_deg=41.22)
    assert session.reduce() == 1
    assert session.model.undo_label == "bring theta to J2000"
    assert session.reduce() == 0


def test_pasting_the_same_again_takes_nothing(session):
    session.new_pair("Invented 5")
    session.paste("1950.5 100.0 2.0\n", equinox="J2000")
    before = session.model.state
    taken = session.paste("1950.5 100.0 2.0\n", equinox="J2000")
    assert (taken.read, taken.appended) == (1, 0) and session.model.state is before
    assert "repeats a measure in the pair file" in taken.text


def test_garbage_takes_nothing(session):
    session.new_pair("Invented 5")
    before = session.model.state
    with pytest.raises(InputError, match="pasted text, line 3, column theta: 'much' is not a num"):
        session.paste("epoch\ttheta\trho\n1950.5\t100\t2\n1951.5\tmuch\t2\n")
    assert session.model.state is before


def test_lists_are_read_all_or_none_in_one_step(session, tmp_path):
    good, bad = tmp_path / "good.csv", tmp_path / "bad.csv"
    good.write_text(LIST)
    bad.write_text("epoch,theta,rho\n1990.5,10.0,wide\n")
    session.new_pair("Invented 5")
    before = session.model.state
    with pytest.raises(InputError, match=r"bad.csv, line 2, column rho: 'wide' is not a number"):
        session.read_lists([good, bad])
    assert session.model.state is before
    bad.write_text("epoch,theta,rho,observer\n1992.5,14.0,1.2,Lark\n1990.5,10.0,1.0,\n")
    taken = session.read_lists([good, bad], equinox="J2000", technique="camera")
    assert (taken.read, taken.appended) == (4, 3)
    assert session.model.pair.measures.observer.tolist() == ["", "", "Lark"]
    assert set(session.model.pair.measures.technique) == {"camera"}
    session.model.undo()
    assert session.model.state is before


def test_a_list_with_a_layout(session, tmp_path):
    session.new_pair("Slate 19")
    taken = session.read_lists(
        [EXAMPLE_FOLDER / "slate_19_mail.txt"], EXAMPLE_FOLDER / "slate_19_mail.toml"
    )
    assert taken.appended == len(session.model.pair.measures) > 10
    assert taken.read > taken.appended  # the example repeats some rows
    with pytest.raises(InputError, match="no such file"):
        session.read_lists([tmp_path / "none.csv"])


# -- texts out -------------------------------------------------------------------------------------


def test_a_table_that_is_copied_can_be_pasted(session, tmp_path):
    session.open_file(pair_file(tmp_path, ra_deg=10.0, dec_deg=20.0))
    session.model.edit_cell(1, "note", 'a "quoted" note')
    session.model.set_use([2], False, "poor seeing")
    session.model.flip([3])
    session.model.edit_cell(4, "theta", "12.5")
    session.model.edit_cell(5, "rho", "")
    text = session.table_text()
    copied = session.model.pair
    session.new_pair("Invented 6")
    session.model.set_identity(ra_deg=10.0, dec_deg=20.0)
    taken = session.paste(text)
    assert taken.reduced == 0
    assert session.model.pair.measures == copied.measures


def test_some_rows_and_columns(session):
    session.model.open(pair(), None)
    text = session.table_text([4, 0], ["epoch", "rho", "use"])
    m = pair().measures
    lines = [f"{m.epoch[k]:.10g}\t{m.rho[k]:.10g}\tyes\tJ2000" for k in (4, 0)]
    assert text.splitlines() == ["epoch\trho\tuse\tequinox", *lines]


def test_no_orbit_no_text(session):
    session.model.open(pair(), None)
    for text in (session.elements_text, session.residuals_text, session.ephemeris_text):
        with pytest.raises(InputError, match="there is no orbit yet; solve first"):
            text()


def test_texts_of_an_orbit(session):
    session.model.open(pair().with_orbit(RecordedOrbit("a", ORBIT, {"P": 0.31})), None)
    assert "62.40" in session.elements_text() and "0.31" in session.elements_text()
    assert len(session.residuals_text().splitlines()) > 6
    text = session.ephemeris_text("2030", "2032", "6 months")
    for epoch in ("2030.000", "2030.500", "2032.000"):
        assert f"{epoch}  " in text
    assert "periastron" in text and text.endswith("Theta at equinox J2000.\n")
    assert len(session.ephemeris_text().splitlines()) > 11
    with pytest.raises(InputError, match="step 'often' is not a length of time"):
        session.ephemeris_text(step="often")
    with pytest.raises(InputError, match="the last epoch 2020 is before the first 2030"):
        session.ephemeris_text("2030", "2020")
