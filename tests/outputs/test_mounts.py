"""A folder on a file system of another machine is told apart."""

from __future__ import annotations

from pathlib import Path

import pytest

from tagstream.outputs.mounts import network_file_system


@pytest.mark.parametrize(
    ("mounts", "told"),
    [
        ("/dev/a / ext4 rw 0 0\n", None),
        ("/dev/a / ext4 rw 0 0\nserver:/x {place} nfs4 rw 0 0\n", "is on a nfs4 file system"),
        ("/dev/a / ext4 rw 0 0\nx {place} fuse.sshfs rw 0 0\n", "is on a fuse.sshfs file system"),
        ("server:/x {place} nfs4 rw 0 0\n/dev/b {place}/runs ext4 rw 0 0\n", None),
        ("server:/x {place}/run nfs rw 0 0\n/dev/a / ext4 rw 0 0\n", None),
        ("nonsense\n", None),
    ],
)
def test_the_nearest_mount_counts(tmp_path: Path, mounts: str, told: str | None) -> None:
    runs = tmp_path / "runs"
    runs.mkdir()
    table = tmp_path / "mounts"
    table.write_text(mounts.format(place=tmp_path))
    assert network_file_system(runs, table) == told


def test_without_a_table_nothing_is_said(tmp_path: Path) -> None:
    assert network_file_system(tmp_path, tmp_path / "none") is None
