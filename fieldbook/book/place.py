"""Where a book lies: on a network, or in a folder that another program mirrors. Warned of, never refused.

SQLite's locks and its -wal need a file system of this machine (sqlite.org/wal.html: 'WAL does not work over a network
filesystem'), and a program that mirrors a folder copies the file without its -wal, at any moment, and may put an older
copy back. A folder is recognised as mirrored by the hidden files and folders such programs keep in it, by the attributes
Windows gives to files that are held elsewhere, and by the place where macOS keeps them; never by its name.
"""

from __future__ import annotations

import os
import re
import subprocess
import sys
from contextlib import suppress
from dataclasses import dataclass
from itertools import islice
from pathlib import Path

MOUNTS = Path("/proc/self/mounts")
NETWORK_TYPES = frozenset(
    {"nfs", "nfs3", "nfs4", "cifs", "smb", "smb2", "smb3", "smbfs", "sshfs", "9p", "afs", "afpfs", "ceph", "glusterfs",
     "lustre", "beegfs", "orangefs", "gpfs", "coda", "ncpfs", "davfs", "davfs2", "webdav", "ocfs2", "gfs2"}
)  # fmt: skip
_MARKER = re.compile(
    r"\.(_?sync(ed|ing)?([._-].+)?|stfolder|stignore|.*[._-]sync[._-](state|journal|cache|db)|.*\.sync\.db)"
)
_MOST_ENTRIES, _MOST_LEVELS = 2000, 40
_HELD_ELSEWHERE = 0x1000 | 0x40000 | 0x400000  # Windows: offline, recall on open, recall on data access
_DRIVE_REMOTE = 4


@dataclass(frozen=True)
class PlaceWarning:
    """One thing to know about where a book lies: code, sentence, what it was seen by."""

    code: str
    text: str
    seen: str


def warnings_of_place(book: Path, mounts: Path = MOUNTS) -> list[PlaceWarning]:
    """What is wrong with the place of a book; empty for a local folder that nothing mirrors, or where nothing can be told."""
    folder = Path(os.path.realpath(book)).parent
    found = []
    network = _network(folder, mounts)
    if network:
        text = (
            f"The book lies on a network or foreign file system ({network}): its locks may not hold there and a commit may"
            " be lost. Record to a disk of this computer and copy afterwards."
        )
        found.append(PlaceWarning("network_folder", text, network))
    mirrored = _mirrored(folder)
    if mirrored:
        text = (
            f"The book lies in a folder that another program seems to mirror ({mirrored}): it copies the book without its"
            " -wal and may put an older one back. Record elsewhere and copy afterwards."
        )
        found.append(PlaceWarning("sync_folder", text, mirrored))
    return found


def _network(folder: Path, mounts: Path) -> str:
    """The type of the file system if it is one of another machine or program, else empty."""
    if sys.platform == "win32":
        return _windows_drive(folder)
    lines: list[str] = []
    with suppress(OSError, subprocess.SubprocessError):
        if sys.platform == "darwin":
            lines = subprocess.run(
                ["/sbin/mount"], capture_output=True, text=True, timeout=5, check=False
            ).stdout.splitlines()
        else:
            lines = mounts.read_text(encoding="utf-8", errors="surrogateescape").splitlines()
    kind = file_system_of(folder, lines, darwin=sys.platform == "darwin")
    return kind if kind in NETWORK_TYPES or kind.startswith("fuse.") else ""


def file_system_of(folder: Path, lines: list[str], *, darwin: bool = False) -> str:
    """The type of the file system of a folder, from the lines of /proc/mounts (or of `mount` on macOS)."""
    best, kind = -1, ""
    for line in lines:
        if darwin:
            found = re.fullmatch(r".+ on (/.*) \(([^,)]+).*\)", line)
            where, name = (found.group(1), found.group(2)) if found else ("", "")
        else:
            parts = line.split(" ")
            where, name = (_unescaped(parts[1]), parts[2]) if len(parts) > 2 else ("", "")
        if where and (folder == Path(where) or Path(where) in folder.parents) and len(where) >= best:
            best, kind = len(where), name  # of two at one place the later lies on top
    return kind


def _unescaped(text: str) -> str:
    return re.sub(r"\\([0-7]{3})", lambda found: chr(int(found.group(1), 8)), text)


def _windows_drive(folder: Path) -> str:
    text = str(folder)
    if text.startswith("\\\\"):
        return "network share"
    import ctypes

    with suppress(OSError, AttributeError):
        kind = ctypes.windll.kernel32.GetDriveTypeW(folder.anchor)  # type: ignore[attr-defined]
        return "network drive" if kind == _DRIVE_REMOTE else ""
    return ""


def _mirrored(folder: Path) -> str:
    """What gives a mirrored folder away, else empty: looked for in it and in every folder above it."""
    home = Path.home()
    if sys.platform == "darwin":
        for place in (home / "Library" / "CloudStorage", home / "Library" / "Mobile Documents"):
            if place in (folder, *folder.parents):
                return str(place)
    for level in islice((folder, *folder.parents), _MOST_LEVELS):
        with suppress(OSError):
            if getattr(level.stat(), "st_file_attributes", 0) & _HELD_ELSEWHERE:
                return f"{level} is held elsewhere"
            with os.scandir(level) as entries:
                for entry in islice(entries, _MOST_ENTRIES):
                    if _MARKER.fullmatch(entry.name):
                        return entry.path
    return ""
