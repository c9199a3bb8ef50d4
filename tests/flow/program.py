"""The program as a person calls it, in a process of its own or in this one."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path
from typing import NamedTuple

import pytest

from tagstream.cli import main

ROOT = Path(__file__).parent.parent.parent


class Outcome(NamedTuple):
    """What a call left: exit code, standard output, standard error."""

    code: int
    out: str
    err: str


def call(capsys: pytest.CaptureFixture[str], *arguments: object) -> Outcome:
    """`tagstream ARGUMENTS` in this process: quick, with kernels already compiled."""
    capsys.readouterr()
    before = sys.argv
    sys.argv = ["tagstream", *map(str, arguments)]
    try:
        with pytest.raises(SystemExit) as ended:
            main()
    finally:
        sys.argv = before
    out, err = capsys.readouterr()
    return Outcome(int(ended.value.code or 0), out, err)


def start(*arguments: object, **options: object) -> subprocess.Popen[str]:
    """`tagstream ARGUMENTS` in a process of its own."""
    process: subprocess.Popen[str] = subprocess.Popen(
        [sys.executable, "-m", "tagstream", *map(str, arguments)],
        cwd=ROOT,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        **options,  # type: ignore[call-overload]
    )
    return process
