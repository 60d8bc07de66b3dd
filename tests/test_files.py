from pathlib import Path

import pytest

from structmap.errors import FileProblemError
from structmap.files import write_file, write_folder


def test_writes_text_and_bytes_and_leaves_nothing_beside(tmp_path):
    write_folder(tmp_path / "out", {"a.txt": "one\ntwo\n", "deep/b.bin": b"\x00\xff"})
    assert (tmp_path / "out/a.txt").read_bytes() == b"one\ntwo\n"
    assert (tmp_path / "out/deep/b.bin").read_bytes() == b"\x00\xff"
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_keeps_other_files_of_a_folder_half_there(tmp_path):
    folder = tmp_path / "out"
    folder.mkdir()
    (folder / "notes of the user.txt").write_text("mine")
    (folder / "a.txt").write_text("half")
    write_folder(folder, {"a.txt": "whole", "b.txt": "whole"})
    assert (folder / "notes of the user.txt").read_text() == "mine"
    assert (folder / "a.txt").read_text() == "whole"
    assert (folder / "b.txt").read_text() == "whole"


def test_a_write_that_fails_changes_nothing(tmp_path, monkeypatch):
    folder = tmp_path / "out"
    write_folder(folder, {"a.txt": "old", "b.txt": "old"})
    opened = Path.open

    def full_disk(path, *rest, **more):
        if path.name == "b.txt":
            raise OSError(28, "No space left on device")
        return opened(path, *rest, **more)

    monkeypatch.setattr(Path, "open", full_disk)
    with pytest.raises(
        FileProblemError, match=r"out: cannot be written \(No space left"
    ):
        write_folder(folder, {"a.txt": "new", "b.txt": "new"})
    monkeypatch.undo()
    assert (folder / "a.txt").read_text() == "old"
    assert (folder / "b.txt").read_text() == "old"
    assert [path.name for path in tmp_path.iterdir()] == ["out"]


def test_refuses_a_file_where_a_folder_is_due(tmp_path):
    (tmp_path / "out").write_text("a file")
    with pytest.raises(FileProblemError, match=r"out: is a file, not a folder; name"):
        write_folder(tmp_path / "out", {"a.txt": "x"})
    assert (tmp_path / "out").read_text() == "a file"


def test_one_file_is_replaced_whole(tmp_path):
    path = tmp_path / "c.csv"
    path.write_text("old")
    write_file(path, "new")
    assert path.read_text() == "new"
    assert [found.name for found in tmp_path.iterdir()] == ["c.csv"]


def test_one_file_in_a_folder_that_cannot_be(tmp_path):
    (tmp_path / "file").write_text("x")
    with pytest.raises(FileProblemError, match=r"c\.csv: cannot be written \("):
        write_file(tmp_path / "file" / "c.csv", "new")
