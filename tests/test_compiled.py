"""The cache of compiled kernels: never stale, private, and not needed."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
CODE = """
import numpy as np
from tagstream import cross_correlation
print(cross_correlation(np.array([0]), np.array([3]), 4, 2)[1].tolist())
"""


def run(env: dict[str, str], code: str = CODE) -> subprocess.CompletedProcess[str]:
    base = {k: v for k, v in os.environ.items() if not k.startswith(("XDG_", "NUMBA_", "CACHE_"))}
    return subprocess.run(
        [sys.executable, "-c", code],
        env=base | {"PYTHONPATH": str(ROOT)} | env,
        capture_output=True,
        text=True,
        timeout=120,
    )


def test_kernels_are_kept_in_a_private_folder_named_after_their_sources(tmp_path: Path) -> None:
    from tagstream.compiled import source_hash

    done = run({"XDG_CACHE_HOME": str(tmp_path)})
    assert done.stdout == "[0, 0, 0, 0, 1]\n", done.stderr
    (folder,) = (tmp_path / "tagstream").iterdir()
    assert source_hash() in folder.name
    assert folder.stat().st_mode & 0o077 == 0
    assert list(folder.rglob("*.nbi"))


def test_a_folder_that_others_can_write_is_not_used(tmp_path: Path) -> None:
    (tmp_path / "tagstream").mkdir()
    (tmp_path / "tagstream").chmod(0o777)
    done = run({"XDG_CACHE_HOME": str(tmp_path)})
    assert done.stdout == "[0, 0, 0, 0, 1]\n", done.stderr
    assert not list((tmp_path / "tagstream").iterdir())


@pytest.mark.parametrize("home", ["file", "missing"])
def test_without_a_place_kernels_are_compiled_anew(tmp_path: Path, home: str) -> None:
    (tmp_path / "file").touch()
    done = run({"XDG_CACHE_HOME": str(tmp_path / "file"), "HOME": str(tmp_path / home)})
    assert done.stdout == "[0, 0, 0, 0, 1]\n", done.stderr


def test_folders_of_other_sources_go_once_they_are_a_day_old(tmp_path: Path) -> None:
    old, young = tmp_path / "tagstream" / "kernels-0-a", tmp_path / "tagstream" / "kernels-0-b"
    (tmp_path / "tagstream").mkdir(mode=0o700)
    for folder in (old, young):
        folder.mkdir()
    os.utime(old, (0, 0))
    run({"XDG_CACHE_HOME": str(tmp_path)}, "import tagstream.compiled")
    assert not old.exists()
    assert young.exists()


# Loaded within the kernels that call them.
CALLED_BY_KERNELS = (
    *("later", "fill_plain", "fill_together", "fill_moved", "is_ordered", "largest_disorder"),
    *("bin_of", "fill_pairs_singly"),
)


def test_a_run_compiles_nothing_after_it_was_warmed() -> None:
    from tagstream.conditioning import kernels as conditioning
    from tagstream.conditioning.ordering import kernels as ordering
    from tagstream.tallies import kernels as tallies

    for module in (conditioning, ordering, tallies):
        module.warm_up()
    before = {
        name: len(made.signatures)
        for module in (conditioning, ordering, tallies)
        for name, made in vars(module).items()
        if hasattr(made, "signatures") and name not in CALLED_BY_KERNELS
    }
    assert {name for name in before if name.startswith("fill_")} >= {"fill_judged", "fill_pairs"}
    assert all(before.values()), before
