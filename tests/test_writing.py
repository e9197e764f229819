"""Writing files: atomically, through links, and to what is no file."""

from __future__ import annotations

import os
import stat
import threading
from pathlib import Path

import pytest

from climbpath.errors import DataError
from climbpath.files import write_atomically


def test_replaces_a_file_and_leaves_nothing_beside_it(tmp_path: Path) -> None:
    target = tmp_path / "a.txt"
    write_atomically(target, "old")
    write_atomically(target, "new →\n")
    assert target.read_bytes() == "new →\n".encode()
    assert list(tmp_path.iterdir()) == [target]


def test_follows_a_link(tmp_path: Path) -> None:
    (tmp_path / "real").write_text("old")
    link = tmp_path / "link"
    link.symlink_to("real")
    write_atomically(link, "new")
    assert link.is_symlink()
    assert (tmp_path / "real").read_text() == "new"


def test_writes_into_a_pipe(tmp_path: Path) -> None:
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    got: list[bytes] = []
    reader = threading.Thread(target=lambda: got.append(pipe.read_bytes()))
    reader.start()
    write_atomically(pipe, b"through")
    reader.join(10.0)
    assert got == [b"through"]
    assert stat.S_ISFIFO(pipe.stat().st_mode)


def test_a_name_as_long_as_may_be(tmp_path: Path) -> None:
    target = tmp_path / ("a" * 255)
    write_atomically(target, "x")
    assert target.read_text() == "x"


@pytest.mark.parametrize("place", ["folder", "none/a", "b" * 300])
def test_says_where_it_cannot_write(tmp_path: Path, place: str) -> None:
    (tmp_path / "folder").mkdir()
    before = sorted(path.name for path in tmp_path.iterdir())
    with pytest.raises(DataError, match="can be written"):
        write_atomically(tmp_path / place, "x")
    assert sorted(path.name for path in tmp_path.iterdir()) == before
