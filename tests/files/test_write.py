"""Files are written whole or not at all, and never over what is there unless asked."""

from __future__ import annotations

from pathlib import Path

import pytest

from trainopt.errors import InputError
from trainopt.files import write
from trainopt.files.write import write_bytes_atomic, write_text_atomic


def test_writes_text(tmp_path: Path) -> None:
    path = tmp_path / "out.txt"
    write_text_atomic(path, "R in bar/LMH, l in L/m²\n")
    assert path.read_text(encoding="utf-8") == "R in bar/LMH, l in L/m²\n"
    assert [p.name for p in tmp_path.iterdir()] == ["out.txt"]


def test_never_overwrites_unless_asked(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    path = Path("out.txt")
    path.write_text("mine")
    with pytest.raises(InputError, match=r"out\.txt: exists already"):
        write_bytes_atomic(path, b"theirs")
    assert path.read_text() == "mine"
    write_bytes_atomic(path, b"theirs", overwrite=True)
    assert path.read_text() == "theirs"
    assert [p.name for p in tmp_path.iterdir()] == ["out.txt"]


def test_keeps_the_permissions_of_what_it_replaces(tmp_path: Path) -> None:
    path = tmp_path / "out.txt"
    path.write_text("mine")
    path.chmod(0o640)
    write_bytes_atomic(path, b"theirs", overwrite=True)
    assert path.stat().st_mode & 0o777 == 0o640


def test_a_new_file_has_the_usual_permissions(tmp_path: Path) -> None:
    (tmp_path / "usual").touch()
    write_bytes_atomic(tmp_path / "out", b"")
    assert (tmp_path / "out").stat().st_mode == (tmp_path / "usual").stat().st_mode


def test_nothing_is_left_behind_when_it_fails(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(_handle: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(write.os, "fsync", full)
    with pytest.raises(InputError, match="No space left"):
        write_bytes_atomic(tmp_path / "out.txt", b"x")
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="cannot be written: No such file"):
        write_text_atomic(tmp_path / "no" / "out.txt", "x")


def test_a_file_system_without_hard_links(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def no_links(_source: Path, _target: Path) -> None:
        raise PermissionError(1, "Operation not permitted")

    monkeypatch.setattr(write.os, "link", no_links)
    path = tmp_path / "out.txt"
    write_text_atomic(path, "x")
    with pytest.raises(InputError, match="exists already"):
        write_text_atomic(path, "y")
    assert path.read_text() == "x"
