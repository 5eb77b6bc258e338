"""Whether a folder lies on a disk of this machine: SQLite's log is lost on a network file system.

The write-ahead log is shared memory between the processes of one machine; over a network it is not
shared, and the file ends up broken without any error before.
"""

from pathlib import Path
from typing import Final

# Names as Linux lists them. "fuse." file systems are told apart by their second half.
_NETWORK_FILE_SYSTEMS: Final = frozenset(
    {
        *("nfs", "nfs4", "cifs", "smbfs", "smb3", "ncpfs", "afs", "ceph", "lustre", "beegfs"),
        *("glusterfs", "gpfs", "davfs", "fuse.sshfs", "fuse.glusterfs", "fuse.cephfs"),
        *("fuse.davfs2", "fuse.rclone", "fuse.s3fs", "fuse.gcsfuse", "fuse.beegfs-mount"),
    },
)
_MOUNTS: Final = Path("/proc/self/mountinfo")


def file_system_of(folder: Path, mounts: str) -> str | None:
    """Return the type of the file system that holds ``folder``; None when it is not listed.

    ``mounts`` is the text of Linux's mountinfo: field 5 is where something is mounted, the first
    field after the lone dash is its type; later lines hide earlier ones at the same place.
    """
    best: tuple[int, str] | None = None
    target = folder.resolve()
    for line in mounts.splitlines():
        left, separator, right = line.partition(" - ")
        fields = left.split(" ")
        if not separator or len(fields) < 5:
            continue
        # Spaces, tabs, newlines and backslashes in a path are written as octal escapes.
        place = Path(fields[4].encode().decode("unicode_escape").encode("latin-1").decode())
        if target.is_relative_to(place):
            depth = len(place.parts)
            if best is None or depth >= best[0]:
                best = (depth, right.split(" ")[0])
    return None if best is None else best[1]


def network_file_system(folder: Path) -> str | None:
    """Return the type of the network file system that holds ``folder``.

    None for a local one, and where the system does not tell (anything but Linux).
    """
    try:
        mounts = _MOUNTS.read_text(encoding="utf-8", errors="surrogateescape")
    except OSError:
        return None
    kind = file_system_of(folder, mounts)
    return kind if kind in _NETWORK_FILE_SYSTEMS else None
