"""What the window remembers, and where."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import pytest

from relorbit.desk.settings import Settings, config_folder
from relorbit.errors import InputError


def test_the_folder_of_each_platform(monkeypatch, tmp_path):
    for name in ("RELORBIT_CONFIG", "XDG_CONFIG_HOME"):
        monkeypatch.delenv(name, raising=False)
    monkeypatch.setattr(Path, "home", lambda: tmp_path)
    monkeypatch.setattr(sys, "platform", "linux")
    assert config_folder() == tmp_path / ".config" / "relorbit"
    monkeypatch.setenv("XDG_CONFIG_HOME", "relative")
    assert config_folder() == tmp_path / ".config" / "relorbit"
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "xdg"))
    assert config_folder() == tmp_path / "xdg" / "relorbit"
    monkeypatch.setattr(sys, "platform", "darwin")
    assert config_folder() == tmp_path / "Library" / "Application Support" / "relorbit"
    monkeypatch.setattr(sys, "platform", "win32")
    monkeypatch.setenv("APPDATA", str(tmp_path / "Roaming"))
    assert config_folder() == tmp_path / "Roaming" / "relorbit"
    monkeypatch.setenv("RELORBIT_CONFIG", str(tmp_path / "mine"))
    assert config_folder() == tmp_path / "mine"


def test_saved_and_loaded(tmp_path):
    folder = tmp_path / "new" / "folder"
    settings = Settings.load(folder)
    assert settings == Settings(folder)
    settings.geometry, settings.panes = "1280x800+-40+20", {"table": 410, "sky": 0.5}
    settings.dark, settings.orientation, settings.scale = True, "eyepiece", 2.0
    settings.recent = ("/a", "/b")
    settings.save()
    assert Settings.load(folder) == settings
    assert json.loads(settings.file.read_text())["version"] == 1


@pytest.mark.parametrize(
    "content",
    [b"", b"{", b"[]", b"null", b"\xff\xfe\x00", b"[" * 100_000, b'{"version": 2, "dark": true}',
     b'{"dark": true}', b'{"version": "1", "dark": true}'],
)  # fmt: skip
def test_a_broken_file_is_begun_anew(tmp_path, content):
    (tmp_path / "desk.json").write_bytes(content)
    settings = Settings.load(tmp_path)
    assert settings == Settings(tmp_path)
    settings.dark = True
    settings.save()
    assert Settings.load(tmp_path).dark is True


def test_a_single_value_that_cannot_be_falls_back(tmp_path):
    said = {
        "version": 1, "recent": "no list", "geometry": "1280x800; exit", "panes": {"a": "wide"},
        "dark": 1, "orientation": "sideways", "scale": 100.0,
    }  # fmt: skip
    (tmp_path / "desk.json").write_text(json.dumps(said))
    assert Settings.load(tmp_path) == Settings(tmp_path)
    said |= {"recent": [f"/{k}" for k in range(20)], "scale": float("nan"), "dark": True}
    (tmp_path / "desk.json").write_text(json.dumps(said))
    settings = Settings.load(tmp_path)
    assert settings.recent == tuple(f"/{k}" for k in range(8))
    assert settings.scale is None and settings.dark


def test_a_file_that_is_a_folder(tmp_path):
    (tmp_path / "desk.json").mkdir()
    settings = Settings.load(tmp_path)
    with pytest.raises(InputError, match="not written: this is a directory"):
        settings.save()
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="cannot make the folder"):
        Settings(tmp_path / "file" / "folder").save()


def test_the_latest_file_comes_first_and_eight_are_kept(tmp_path):
    settings = Settings(tmp_path)
    for k in range(10):
        settings.remember(tmp_path / f"{k}.ecsv")
    settings.remember(tmp_path / "5.ecsv")
    assert [Path(path).stem for path in settings.recent] == list("59876432")
    settings.forget(tmp_path / "9.ecsv")
    assert [Path(path).stem for path in Settings.load(tmp_path).recent] == list("5876432")


def test_a_relative_path_is_remembered_whole(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    settings = Settings(tmp_path)
    settings.remember("pair.ecsv")
    assert settings.recent == (str(tmp_path / "pair.ecsv"),)


def test_two_windows_keep_each_others_recent_files(tmp_path):
    one, two = Settings.load(tmp_path), Settings.load(tmp_path)
    one.remember("/a")
    two.remember("/b")
    one.remember("/c")
    assert [Path(path).name for path in Settings.load(tmp_path).recent] == ["c", "b", "a"]


def test_remembering_works_where_nothing_can_be_written(tmp_path):
    (tmp_path / "file").write_text("")
    settings = Settings(tmp_path / "file")
    settings.remember("/a")
    assert [Path(path).name for path in settings.recent] == ["a"]
