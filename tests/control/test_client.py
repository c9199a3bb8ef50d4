"""How a run is found and asked, and what is said when nobody answers."""

from __future__ import annotations

import json
import os
from collections.abc import Iterator
from pathlib import Path

import pytest

from tagstream.control import PlainRequest
from tagstream.control import client as client_module
from tagstream.control.announced import FILE, Announced, announce, announced, withdraw
from tagstream.control.client import ask_run
from tagstream.errors import ControlError
from tagstream.outputs.folder import RunFolder
from tagstream.security import make_keys
from tagstream.settings.sections import Security
from tests.control.asked import answering
from tests.control.test_server import STATUS, STOP, handle


@pytest.fixture
def run(tmp_path: Path) -> Iterator[RunFolder]:
    """A run folder that this process holds."""
    folder = RunFolder.create(tmp_path / "runs", "x")
    (folder.path / "latest.h5").touch()
    folder.announce()
    yield folder
    folder.close()


@pytest.fixture
def address(tmp_path: Path) -> str:
    return f"ipc://{tmp_path}/c"


def test_by_folder_by_link_by_file_and_by_address(run: RunFolder, address: str) -> None:
    announce(run.path, address)
    link = run.path.with_name("x")
    with answering(address, handle):
        for name in (run.path, link, run.path / "latest.h5", address):
            assert ask_run(str(name), STATUS)["state"] == "running"


def test_what_is_announced_says_who_answers(run: RunFolder, address: str) -> None:
    announce(run.path, address, Path("/keys"))
    told = announced(str(run.path))
    assert (told.address, told.keys, told.pid) == (address, "/keys", os.getpid())
    withdraw(run.path)
    withdraw(run.path)
    assert not (run.path / FILE).exists()
    assert announced("ipc:///x/y") == Announced("ipc:///x/y")


def test_a_refusal_is_an_error_with_its_reason(run: RunFolder, address: str) -> None:
    announce(run.path, address)
    with answering(address, handle), pytest.raises(ControlError, match="cannot stop now"):
        ask_run(str(run.path), STOP)


def test_the_keys_that_the_run_names_are_used(run: RunFolder, tmp_path: Path) -> None:
    files = make_keys(tmp_path / "keys")
    security = Security(keys=files.folder, authorised=files.authorised)
    with answering("tcp://127.0.0.1:*", handle, security) as server:
        announce(run.path, server.address, files.folder)
        assert ask_run(str(run.path), STATUS)["state"] == "running"
        assert ask_run(server.address, STATUS, files.folder)["state"] == "running"


def test_no_run_at_all(tmp_path: Path) -> None:
    with pytest.raises(ControlError, match=r"no run: a folder that holds a latest\.h5"):
        ask_run(str(tmp_path), STATUS)


def test_a_run_that_nobody_writes_is_told_at_once(run: RunFolder, address: str) -> None:
    announce(run.path, address)  # as a process that was killed leaves it
    run.close()
    with pytest.raises(ControlError, match="no process writes this run any more"):
        ask_run(str(run.path), STATUS)
    again = RunFolder.hold(run.path)
    run._lock = again._lock  # closed by the fixture


def test_a_run_without_control(run: RunFolder) -> None:
    with pytest.raises(ControlError, match=r"takes no requests.*\[control\].*log\.jsonl"):
        ask_run(str(run.path), STATUS)


def test_a_broken_announcement(run: RunFolder) -> None:
    for text in ("", "[]", "{}", '{"address": "ipc:///x", "odd": 1}'):
        (run.path / FILE).write_text(text)
        with pytest.raises(ControlError, match="cannot be read"):
            ask_run(str(run.path), STATUS)


def test_a_run_on_another_machine(run: RunFolder) -> None:
    told = {"address": "ipc:///x", "pid": 1, "host": "the-other-one"}
    (run.path / FILE).write_text(json.dumps(told))
    with pytest.raises(ControlError, match="the-other-one; ask from that machine"):
        ask_run(str(run.path), STATUS)


def test_silence_says_where_to_look(
    run: RunFolder, address: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(client_module, "TIMEOUT_S", 0.1)
    announce(run.path, address)
    with pytest.raises(ControlError, match=rf"process {os.getpid()} .* does not answer at ipc://"):
        ask_run(str(run.path), STATUS)
    with pytest.raises(ControlError, match="nobody answers; look whether"):
        ask_run(address, PlainRequest(request="status"))
