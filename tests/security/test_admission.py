"""What is answered when a peer shows its key."""

from __future__ import annotations

from pathlib import Path

import pytest
import zmq
from zmq.utils import z85

from tagstream.errors import SettingsError
from tagstream.security.admission import ENDPOINT, Admission
from tagstream.security.keys import KeyFiles, load_public, make_keys


def asked(folder: Path | None, *frames: bytes) -> tuple[bytes, Admission]:
    """The status that a request is answered with."""
    with zmq.Context() as context:
        admission = Admission(context, folder)
        try:
            with context.socket(zmq.REQ) as request:
                request.connect(ENDPOINT)
                request.send_multipart(frames)
                assert request.poll(5000)
                answer = request.recv_multipart()
        finally:
            admission.close()
    assert len(answer) == 6
    return answer[2], admission


def request_of(public: bytes, mechanism: bytes = b"CURVE") -> list[bytes]:
    return [b"1.0", b"7", b"tagstream", b"127.0.0.1", b"", mechanism, z85.decode(public)]


@pytest.fixture
def files(tmp_path: Path) -> KeyFiles:
    return make_keys(tmp_path / "keys")


def test_an_authorised_key_is_admitted(files: KeyFiles) -> None:
    public = load_public(files.public("client"))
    status, admission = asked(files.authorised, *request_of(public))
    assert (status, admission.admitted, admission.denied) == (b"200", 1, 0)


def test_anything_else_is_denied(files: KeyFiles) -> None:
    client, server = load_public(files.public("client")), load_public(files.public("server"))
    for frames in (
        request_of(server),
        request_of(client, b"NULL"),
        request_of(client)[:6],
        [*request_of(client), b"more"],
        [*request_of(client)[:6], b"short"],
        [b"1.0"],
    ):
        status, admission = asked(files.authorised, *frames)
        assert (status, admission.admitted, admission.denied) == (b"400", 0, 1), frames
        assert admission.last_denied


def test_without_a_folder_nobody_is_admitted(files: KeyFiles) -> None:
    assert asked(None, *request_of(load_public(files.public("client"))))[0] == b"400"


def test_a_folder_that_is_not_there_is_told(tmp_path: Path) -> None:
    with zmq.Context() as context, pytest.raises(SettingsError, match="no folder"):
        Admission(context, tmp_path / "nobody")


def test_a_context_has_one_admission(files: KeyFiles) -> None:
    with zmq.Context() as context:
        first = Admission(context, None)
        with pytest.raises(zmq.ZMQError):
            Admission(context, None)
        first.close()
