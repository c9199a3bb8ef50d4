"""The verb `send`: what it prints for people and for scripts, and what it refuses."""

from __future__ import annotations

import json
import signal
import subprocess
import sys
import threading
from pathlib import Path

import numpy as np
import pytest
import zmq

from tests.flow.conftest import Caller
from tests.flow.program import ROOT, start
from tests.recording.made import piece, write
from tests.sending.test_messages_line import received, receiver
from tests.sending.test_records_line import SETTINGS


@pytest.fixture
def recorded(tmp_path: Path) -> Path:
    tags = [(1000 * t, t % 2) for t in range(500)]
    return write(tmp_path / "a.h5", [piece(tags, (0, 10**6))])


def test_messages_are_sent_and_counted(tmp_path: Path, recorded: Path, tagstream: Caller) -> None:
    with receiver(zmq.PULL, f"ipc://{tmp_path}/in") as (socket, address):
        counts: list[int] = []
        receiving = threading.Thread(
            target=lambda: counts.extend(m.header.count for m in received(socket, 2))
        )
        receiving.start()
        done = tagstream("send", recorded, address, "--fast", "--repeat", 2, "--json")
        receiving.join()
    assert done.code == 0, done.err
    assert counts == [500, 500]
    told = json.loads(done.out)
    assert (told["counts"], told["sessions"]) == ({"messages": 2, "tags": 1000}, 2)


def test_records_go_to_standard_output_and_the_report_beside(
    tmp_path: Path, recorded: Path
) -> None:
    settings = tmp_path / "a.toml"
    settings.write_text(SETTINGS)
    command = [sys.executable, "-m", "tagstream", "send", recorded, "-", "--records", settings]
    done = subprocess.run([str(word) for word in command], cwd=ROOT, capture_output=True)
    assert done.returncode == 0, done.stderr
    numbers = np.frombuffer(done.stdout, "<u4")
    assert numbers.tolist() == [(t % 2) << 16 | t for t in range(500)]
    assert b"500 tags, 0 left out" in done.stderr


def test_a_stop_is_clean_and_told(tmp_path: Path) -> None:
    """The second interval comes after an hour."""
    hour = 3600 * 10**12
    pieces = [piece([(begin + 5, 1)], (begin, begin + 10)) for begin in (0, hour)]
    path = write(tmp_path / "b.h5", pieces)
    address = f"ipc://{tmp_path}/in"
    with (
        receiver(zmq.PULL, address) as (socket, _),
        start("send", path, address) as process,
    ):
        assert received(socket, 1)[0].header.end == 10
        assert received(socket, 1)[0].header.count == 0  # a heartbeat in the gap
        process.send_signal(signal.SIGTERM)
        out, err = process.communicate()
    assert process.returncode == 128 + signal.SIGTERM, err
    assert "messages, 1 tags" in out


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["127.0.0.1:1"], "give --records"),
        (["ipc://x", "--fast", "--pace", "1"], "exclude each other"),
        (["ipc://x", "--repeat", "0"], "x>=1"),
        (["tcp://192.0.2.1:5570"], "192.0.2.1"),
    ],
)
def test_what_cannot_be_is_refused(
    options: list[str], words: str, recorded: Path, tagstream: Caller
) -> None:
    done = tagstream("send", recorded, *options)
    assert done.code == 2
    assert words in done.err
