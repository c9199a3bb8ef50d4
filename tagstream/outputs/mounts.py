"""Whether a folder lies on a file system of another machine, where SWMR does not work."""

from __future__ import annotations

from pathlib import Path

NETWORK = ("nfs", "nfs4", "cifs", "smb3", "smbfs", "fuse", "9p", "afs", "ceph", "lustre")


def network_file_system(folder: Path, mounts: Path = Path("/proc/mounts")) -> str | None:
    """What is unsuitable about the file system of a folder, in words; None if nothing is.

    mounts: the table of mounts, as the kernel gives it; without one nothing is said.
    """
    try:
        lines = mounts.read_text(errors="replace").splitlines()
    except OSError:
        return None
    found, longest = "", -1
    place = str(folder.resolve())
    for line in lines:
        words = line.split(" ")
        if len(words) < 3:
            continue
        point = words[1].replace("\\040", " ")
        inside = place == point or place.startswith(point.rstrip("/") + "/")
        if inside and len(point) >= longest:
            found, longest = words[2], len(point)
    kind = found.split(".")[0]
    return f"is on a {found} file system" if kind in NETWORK else None
