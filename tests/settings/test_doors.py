"""Where a run can be reached from, in words that do not promise too much."""

from __future__ import annotations

import re
from typing import Any

import pytest

from tagstream.settings.doors import doors, near
from tests.fakes_settings import make_settings

RECORDS = {"record_bytes": 8, "tick": "1 ps", "time_bits": [0, 48], "channel_bits": [48, 8]}
KEYS = {"keys": "keys", "authorised": "friends"}


@pytest.mark.parametrize(
    ("address", "expected"),
    [
        ("tcp://127.0.0.1:5570", True),
        ("tcp://localhost:5570", True),
        ("tcp://[::1]:5570", True),
        ("ipc:///tmp/tags", True),
        ("127.0.0.1:7700", True),
        ("tcp://*:5570", False),
        ("tcp://0.0.0.0:5570", False),
        ("tcp://127.evil.example:5570", False),
        ("10.0.0.7:7700", False),
    ],
)
def test_what_only_this_machine_can_reach(address: str, expected: bool) -> None:
    assert near(address) == expected


@pytest.mark.parametrize(
    ("feed", "security", "says"),
    [
        ({"kind": "zmq", "address": "tcp://127.0.0.1:1"}, None, "connected to.*only from this"),
        ({"kind": "zmq", "address": "tcp://*:1", "bind": True}, None, "is bound.*by anybody"),
        ({"kind": "zmq", "address": "tcp://*:1", "bind": True}, KEYS, "encrypted; only keys"),
        ({"kind": "zmq", "address": "tcp://[::1]:1", "bind": True}, KEYS, "machine; encrypted"),
        ({"kind": "zmq", "address": "tcp://10.0.0.7:1"}, KEYS, "by the key of the peer"),
        ({"kind": "tcp", "listen": "0.0.0.0:1", **RECORDS}, KEYS, "is bound.*by anybody"),
        ({"kind": "tcp", "listen": "127.0.0.1:1", **RECORDS}, None, "only from this machine"),
        ({"kind": "tcp", "connect": "10.0.0.7:1", **RECORDS}, None, "raw TCP is not encrypted"),
        ({"kind": "stdin", **RECORDS}, None, "standard input"),
    ],
)
def test_each_feed_says_how_it_is_reached(
    feed: dict[str, Any], security: dict[str, str] | None, says: str
) -> None:
    more: dict[str, Any] = {} if security is None else {"security": security}
    (text,) = doors(make_settings(feed=feed, **more))
    assert re.search(says, text), text


def test_outputs_that_are_on_are_named_and_files_open_nothing() -> None:
    assert doors(make_settings()) == []
    found = doors(
        make_settings(
            publish={"address": "tcp://127.0.0.1:5571"},
            control={},
            metrics={"listen": "0.0.0.0:9464"},
        )
    )
    assert [text.split()[0] for text in found] == ["[publish]", "[control]", "[metrics]"]
    assert "private socket file" in found[1]
    assert "by anybody" in found[2]
