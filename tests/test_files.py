"""Files are written whole or not at all."""

from __future__ import annotations

import os
import stat
from pathlib import Path

import pytest

from pulsewright.errors import FileMistake
from pulsewright.files import read_whole, write_whole


def names(folder: Path) -> list[str]:
    """What lies in the folder."""
    return sorted(path.name for path in folder.iterdir())


def test_a_new_file_holds_the_bytes(tmp_path: Path) -> None:
    """A file that was not there holds exactly the bytes, and nothing else is left in the folder."""
    write_whole(tmp_path / "dump.bin", b"\x00\xff\r\n")
    assert read_whole(str(tmp_path / "dump.bin")) == b"\x00\xff\r\n"
    assert names(tmp_path) == ["dump.bin"]


def test_a_new_file_follows_the_umask(tmp_path: Path) -> None:
    """A new file can be read by those the user's umask lets read."""
    before = os.umask(0o027)
    try:
        write_whole(tmp_path / "dump.bin", b"1")
    finally:
        os.umask(before)
    assert stat.S_IMODE((tmp_path / "dump.bin").stat().st_mode) == 0o640


def test_an_existing_file_keeps_its_permissions(tmp_path: Path) -> None:
    """A file that is written again has the permissions it had."""
    path = tmp_path / "dump.bin"
    path.write_bytes(b"old contents, longer than the new")
    path.chmod(0o604)
    write_whole(path, b"new")
    assert path.read_bytes() == b"new"
    assert stat.S_IMODE(path.stat().st_mode) == 0o604


def test_a_link_keeps_pointing(tmp_path: Path) -> None:
    """Writing through a link changes the file it points to, not the link."""
    (tmp_path / "true.bin").write_bytes(b"old")
    (tmp_path / "link.bin").symlink_to("true.bin")
    write_whole(tmp_path / "link.bin", b"new")
    assert (tmp_path / "link.bin").is_symlink()
    assert (tmp_path / "true.bin").read_bytes() == b"new"


@pytest.mark.parametrize("fault", [OSError(28, "No space left on device"), KeyboardInterrupt()])
def test_a_failed_write_leaves_the_old_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, fault: BaseException
) -> None:
    """A full disk or an interrupt before the rename leaves the old contents, and no litter."""
    path = tmp_path / "dump.bin"
    path.write_bytes(b"old")

    def fail(handle: int) -> None:
        raise fault

    monkeypatch.setattr(os, "fsync", fail)
    wanted = FileMistake if isinstance(fault, OSError) else KeyboardInterrupt
    with pytest.raises(wanted):
        write_whole(path, b"new")
    assert path.read_bytes() == b"old"
    assert names(tmp_path) == ["dump.bin"]


def test_a_reader_never_sees_half_a_file(tmp_path: Path) -> None:
    """Who has the old file open goes on reading the old contents: the new ones are another file that takes the name."""
    path = tmp_path / "dump.bin"
    path.write_bytes(b"old contents")
    with path.open("rb", buffering=0) as reader:
        assert reader.read(4) == b"old "
        write_whole(path, b"new")
        assert reader.read() == b"contents"


def test_a_missing_folder_is_a_plain_error(tmp_path: Path) -> None:
    """A folder that is not there is named, with exit 2."""
    with pytest.raises(FileMistake, match=r"cannot write .*nowhere/dump\.bin: No such file or directory") as caught:
        write_whole(tmp_path / "nowhere" / "dump.bin", b"1")
    assert caught.value.exit_code == 2


def test_a_folder_is_not_written_over(tmp_path: Path) -> None:
    """A folder of that name stays and is named."""
    (tmp_path / "dump.bin").mkdir()
    with pytest.raises(FileMistake, match="Is a directory"):
        write_whole(tmp_path / "dump.bin", b"1")
    assert (tmp_path / "dump.bin").is_dir()


def test_a_pipe_is_written_to_and_stays_a_pipe(tmp_path: Path) -> None:
    """A pipe or a device is written to; it is not replaced by a file."""
    path = tmp_path / "pipe"
    os.mkfifo(path)
    reader = os.open(path, os.O_RDONLY | os.O_NONBLOCK)
    try:
        write_whole(path, b"through")
        assert os.read(reader, 100) == b"through"
    finally:
        os.close(reader)
    assert stat.S_ISFIFO(path.stat().st_mode)


def test_a_missing_file_is_a_plain_error(tmp_path: Path) -> None:
    """A file that is not there is named when it is read."""
    with pytest.raises(FileMistake, match=r"cannot read .*none\.bin: No such file or directory"):
        read_whole(tmp_path / "none.bin")
