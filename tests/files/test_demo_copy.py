"""The demo workspace copied out: whole, usable, never over anything."""

from __future__ import annotations

from pathlib import Path

import pytest

from trainopt.errors import InputError
from trainopt.files import check, demo, load_case
from trainopt.files.demo import copy_demo, demo_folder


def test_every_file_of_the_demo_is_copied(tmp_path: Path) -> None:
    files = copy_demo(tmp_path / "mine")
    assert {path for path in (tmp_path / "mine").rglob("*") if path.is_file()} == set(files)
    for path in files:
        original = demo_folder() / path.relative_to(tmp_path / "mine")
        assert path.read_bytes() == original.read_bytes()
    assert [path.name for path in tmp_path.iterdir()] == ["mine"]
    assert check([tmp_path / "mine"])[0] == ()
    assert load_case(tmp_path / "mine/scenarios/harvest.yaml").workspace.root == (tmp_path / "mine").resolve()


def test_an_empty_folder_will_do_and_the_current_one_is_found_by_name(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("mine").mkdir()
    assert copy_demo("mine")
    assert Path("mine/models/catalog.yaml").is_file()


@pytest.mark.parametrize("kind", ["folder", "file"])
def test_nothing_is_overwritten(tmp_path: Path, kind: str, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    mine = Path("mine")
    if kind == "folder":
        mine.mkdir()
        (mine / "notes.txt").write_text("mine")
    else:
        mine.write_text("mine")
    with pytest.raises(InputError, match=r"^mine: exists already"):
        copy_demo(mine)
    assert (mine / "notes.txt" if kind == "folder" else mine).read_text() == "mine"
    assert len(list(tmp_path.rglob("*"))) == (2 if kind == "folder" else 1)


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="no such folder; expected one to put mine into"):
        copy_demo(tmp_path / "no" / "mine")


def test_half_a_copy_never_stays(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    copied = []

    def third_fails(source: Path, target: Path) -> None:
        copied.append(source)
        if len(copied) == 3:
            raise OSError(28, "No space left on device")
        target.write_bytes(source.read_bytes())

    monkeypatch.setattr(demo.shutil, "copyfile", third_fails)
    with pytest.raises(InputError, match="No space left"):
        copy_demo(tmp_path / "mine")
    assert list(tmp_path.iterdir()) == []


def test_the_installed_package_brings_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    package = tmp_path / "trainopt"
    for part in ("files", "demo/models", "demo/scenarios"):
        (package / part).mkdir(parents=True)
    monkeypatch.setattr(demo, "__file__", str(package / "files" / "demo.py"))
    assert demo_folder() == package / "demo"
