"""Where a book lies: network file systems and mirrored folders are told from local ones, whatever their names."""

from __future__ import annotations

import json
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from fieldbook.book.place import file_system_of, warnings_of_place

MOUNTS = """\
/dev/sda1 / ext4 rw,relatime 0 0
server:/jobs /mnt/jobs nfs4 rw 0 0
//office/share /mnt/the\\040office cifs rw 0 0
you@host:/home /home/kell/far fuse.sshfs rw 0 0
/dev/sdb1 /media/kell/STICK fuseblk rw 0 0
/dev/sdc1 /media/kell/nfs vfat rw 0 0
shared /mnt/host 9p rw 0 0
tmpfs /mnt/jobs/local tmpfs rw 0 0
"""


@pytest.mark.parametrize(
    ("folder", "kind"),
    [
        ("/mnt/jobs/2027", "nfs4"),
        ("/mnt/the office/a", "cifs"),
        ("/home/kell/far", "fuse.sshfs"),
        ("/mnt/host", "9p"),
        ("/home/kell/books", "ext4"),
        ("/media/kell/STICK/books", "fuseblk"),
        ("/media/kell/nfs/cifs", "vfat"),  # odd names are only names
        ("/mnt/jobs/local", "tmpfs"),
        ("/mnt/jobs2", "ext4"),
    ],
)
def test_the_file_system_of_a_folder(folder: str, kind: str) -> None:
    assert file_system_of(Path(folder), MOUNTS.splitlines()) == kind


def test_macos_lines() -> None:
    lines = ["/dev/disk3s1 on / (apfs, local, journaled)", "//kell@office/jobs on /Volumes/jobs (smbfs, nodev, nosuid)"]
    assert file_system_of(Path("/Volumes/jobs/a"), lines, darwin=True) == "smbfs"
    assert file_system_of(Path("/Users/kell"), lines, darwin=True) == "apfs"


@pytest.mark.skipif(sys.platform != "linux", reason="not run: reads mounts as Linux shows them")
def test_a_network_and_a_local_disk(tmp_path: Path) -> None:
    mounts = tmp_path / "mounts"
    mounts.write_text(f"/dev/sda1 / ext4 rw 0 0\nserver:/jobs {tmp_path} nfs rw 0 0\n")
    assert [item.code for item in warnings_of_place(tmp_path / "a.book", mounts)] == ["network_folder"]
    mounts.write_text(f"/dev/sda1 / ext4 rw 0 0\n/dev/sdb1 {tmp_path} fuseblk rw 0 0\n")
    assert warnings_of_place(tmp_path / "a.book", mounts) == []


@pytest.mark.parametrize("marker", [".sync", ".sync_journal.db", ".stfolder", "._sync_1a2b3c.db", ".synced"])
def test_a_mirrored_folder_is_known_by_what_lies_in_it(tmp_path: Path, marker: str) -> None:
    folder = tmp_path / "jobs" / "ridge"
    folder.mkdir(parents=True)
    (tmp_path / "jobs" / marker).touch()
    empty = tmp_path / "mounts"
    empty.touch()
    assert [item.code for item in warnings_of_place(folder / "a.book", empty)] == ["sync_folder"]


@pytest.mark.parametrize("name", ["sync", "synced jobs", "cloud", "nfs", "sync.book", "mirror", "asynchronous"])
def test_names_alone_give_no_warning(tmp_path: Path, name: str) -> None:
    folder = tmp_path / name
    folder.mkdir()
    (folder / "sync").touch()
    (folder / ".asynclog").touch()
    empty = tmp_path / "mounts"
    empty.touch()
    assert warnings_of_place(folder / "a.book", empty) == []


def test_observe_warns_and_enters_it_once(
    tmp_path: Path, short_session: Path, run_fieldbook: Callable[..., tuple[int, str, str]]
) -> None:
    (tmp_path / ".stfolder").mkdir()
    code, out, err = run_fieldbook("observe", tmp_path / "a.book", "--session", short_session, "--json")
    assert code == 0
    assert "warning: The book lies in a folder that another program seems to mirror" in err
    found = [item for item in json.loads(out)["findings"] if item["code"] == "sync_folder"]
    assert [item["severity"] for item in found] == ["caution"]
