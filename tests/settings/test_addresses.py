"""Addresses in the settings, each wrong one with a sentence."""

from __future__ import annotations

from typing import Any

import pytest

from tagstream.settings.addresses import address_problems, zmq_problem
from tests.fakes_settings import make_settings

RECORDS = {"kind": "tcp", "record_bytes": 8, "tick": "1 ps"} | {
    "time_bits": [0, 48],
    "channel_bits": [48, 8],
}
KEYS = {"keys": "keys"}
GUARDED = {"keys": "keys", "authorised": "keys/authorised"}


def found(**tables: Any) -> list[str]:
    settings = make_settings(**tables)
    return list(
        address_problems({key: getattr(settings, key) for key in type(settings).model_fields})
    )


def zmq(address: str, **more: Any) -> dict[str, Any]:
    return {"kind": "zmq", "address": address} | more


@pytest.mark.parametrize(
    "tables",
    [
        {},
        {"feed": zmq("tcp://127.0.0.1:5570")},
        {"feed": zmq("tcp://[::1]:5570", bind=True)},
        {"feed": zmq("ipc:///run/user/1000/tags", bind=True)},
        {"feed": zmq("tcp://localhost:5570")},
        {"feed": zmq("tcp://127.0.0.1:*", bind=True)},
        {"feed": zmq("tcp://*:5570", bind=True), "security": GUARDED},
        {"feed": zmq("tcp://lab-7.example:5570", server_key="a.public"), "security": KEYS},
        {"feed": RECORDS | {"listen": "127.0.0.1:0"}},
        {"feed": RECORDS | {"connect": "lab.example:7700"}},
        {"publish": {"address": "tcp://127.0.0.1:5571"}, "control": {}, "metrics": {}},
        {"publish": {"address": "tcp://0.0.0.0:5571"}, "security": GUARDED},
        {"metrics": {"listen": "[::1]:9464"}},
    ],
    ids=str,
)
def test_what_is_right_is_not_complained_of(tables: dict[str, Any]) -> None:
    assert found(**tables) == []


@pytest.mark.parametrize(
    ("tables", "says"),
    [
        ({"feed": zmq("127.0.0.1:5570")}, "right would be tcp://HOST:PORT or ipc:///PATH"),
        ({"feed": zmq("udp://127.0.0.1:5570")}, "right would be tcp://HOST:PORT"),
        ({"feed": zmq("tcp://127.0.0.1")}, "right would be tcp://HOST:PORT"),
        ({"feed": zmq("tcp://127.0.0.1:0", bind=True)}, "a port from 1 to 65535"),
        ({"feed": zmq("tcp://127.0.0.1:65536")}, "a port from 1 to 65535"),
        ({"feed": zmq("tcp://127.0.0.1:*")}, "* is for binding"),
        ({"feed": zmq("tcp://*:5570")}, "* is for binding"),
        ({"feed": zmq("ipc://tags", bind=True)}, "a whole path"),
        ({"feed": zmq("ipc:///" + "x" * 107)}, "at most 107"),
        ({"feed": zmq("tcp://*:5570", bind=True)}, "`tagstream keys FOLDER`"),
        ({"feed": zmq("tcp://*:5570", bind=True), "security": KEYS}, "keys and authorised"),
        ({"feed": zmq("tcp://192.0.2.7:5570")}, "right would be server_key"),
        ({"feed": zmq("tcp://192.0.2.7:5570"), "security": GUARDED}, "right would be server_key"),
        ({"feed": zmq("tcp://192.0.2.7:5570", server_key="a")}, "server_key: is of use only"),
        (
            {"feed": zmq("tcp://*:1", server_key="a", bind=True), "security": GUARDED},
            "server_key: not used with bind",
        ),
        ({"feed": zmq("ipc:///a", server_key="a"), "security": KEYS}, "not used with ipc://"),
        ({"feed": RECORDS | {"listen": "7700"}}, "[feed] listen"),
        ({"feed": RECORDS | {"listen": "tcp://127.0.0.1:7700"}}, "HOST:PORT, such as"),
        ({"feed": RECORDS | {"connect": "127.0.0.1:0"}}, "a port from 1 to 65535"),
        ({"publish": {"address": "tcp://0.0.0.0:5571"}}, "[publish] address"),
        ({"publish": {"address": "auto"}}, "[publish] address"),
        ({"control": {"address": "tcp://*:5572"}}, "[control] address"),
        ({"control": {"address": "ipc://here"}}, "[control] address"),
        ({"metrics": {"listen": "0.0.0.0:9464"}}, "such as 127.0.0.1:9464"),
        ({"metrics": {"listen": "9464"}}, "[metrics] listen"),
    ],
    ids=str,
)
def test_what_is_wrong_is_told_once(tables: dict[str, Any], says: str) -> None:
    (text,) = found(**tables)
    assert says in text
    assert text.startswith("[")


def test_abstract_sockets_have_no_owner_and_are_refused() -> None:
    assert zmq_problem("ipc://@tags", binds=True) is not None
