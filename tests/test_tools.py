"""The two commands say clearly what a machine lacks."""

from __future__ import annotations

import os
import shutil
import subprocess
from pathlib import Path

import pytest

TOOLS = Path(__file__).parent.parent / "tools"
NEEDED = ("bash", "cat", "cksum", "cut", "dirname", "env", "flock", "mkdir")


@pytest.fixture
def bare(tmp_path: Path) -> Path:
    """A folder to be the whole PATH: what the tools use of a system, and no Python."""
    folder = tmp_path / "bin"
    folder.mkdir()
    for name in NEEDED:
        found = shutil.which(name)
        if found:
            (folder / name).symlink_to(found)
    return folder


def python(folder: Path, version: str, venv: bool = True) -> None:
    """A stand-in for a Python: it knows its version and whether it can make environments."""
    script = f"""#!{shutil.which("bash")}
case "$2" in
  *print*) echo {version} ;;
  *sys.exit*) [ {version.split(".")[1]} -ge 11 ] ;;
  *ensurepip*) {"true" if venv else "false"} ;;
esac
"""
    (folder / "python3").write_text(script)
    (folder / "python3").chmod(0o755)


def run(tool: str, path: Path, **env: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [shutil.which("bash") or "bash", str(TOOLS / tool)],
        env={"PATH": str(path), "HOME": str(path)} | env,
        cwd="/",
        capture_output=True,
        text=True,
        timeout=60,
    )


@pytest.mark.parametrize("tool", ["demo", "test"])
def test_no_python(bare: Path, tool: str) -> None:
    done = run(tool, bare)
    assert done.returncode == 1
    assert "Python 3.11 or newer is needed; found: none." in done.stderr
    assert "TAGSTREAM_PYTHON=" in done.stderr


@pytest.mark.parametrize("tool", ["demo", "test"])
def test_a_python_too_old(bare: Path, tool: str) -> None:
    python(bare, "3.9")
    done = run(tool, bare)
    assert done.returncode == 1
    assert "found: python3 (3.9)" in done.stderr


@pytest.mark.parametrize("tool", ["demo", "test"])
def test_no_venv_module(bare: Path, tool: str) -> None:
    python(bare, "3.12", venv=False)
    done = run(tool, bare)
    assert done.returncode == 1
    assert "venv and ensurepip are missing" in done.stderr
    assert "apt install python3-venv" in done.stderr


def test_the_tools_can_be_run() -> None:
    for tool in ("demo", "test", "bench"):
        assert os.access(TOOLS / tool, os.X_OK)
