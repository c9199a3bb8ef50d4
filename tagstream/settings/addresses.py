"""Addresses in the settings: what they must look like, and which of them need keys."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from tagstream.settings.doors import near
from tagstream.settings.feeds import TcpFeed, ZmqFeed
from tagstream.settings.sections import Security
from tagstream.settings.validation import shown

PATH_BYTES = 107  # of a socket file, the limit of the system
AUTO = "auto"  # of [control]: a private socket file
IPC = "ipc://"
_HOST = r"(?P<host>\[[0-9A-Fa-f:.]+(?:%\w+)?\]|[A-Za-z0-9_](?:[A-Za-z0-9_.-]*)|\*)"
_TCP = re.compile(rf"tcp://{_HOST}:(?P<port>[0-9]{{1,5}}|\*)")
_HOST_PORT = re.compile(rf"{_HOST}:(?P<port>[0-9]{{1,5}})")

NEEDS_AUTHORISED = (
    "others can reach this address, and nothing asks who they are; right would be [security] with"
    " keys and authorised, which `tagstream keys FOLDER` makes, or an address of this machine"
)
NEEDS_SERVER_KEY = (
    "this address is not of this machine, and nothing proves who answers there; right would be"
    " server_key, the public key of that side, and [security] keys, which `tagstream keys FOLDER`"
    " makes"
)
NEEDS_OWN_KEYS = (
    "is of use only with keys of one's own; right would be [security] keys, which"
    " `tagstream keys FOLDER` makes"
)


def ipc_path(address: str) -> Path | None:
    """The path of the socket file of an address, or None if it is of another kind."""
    return Path(address.removeprefix(IPC)) if address.startswith(IPC) else None


def path_problem(path: Path) -> str | None:
    """What is wrong with the path of a socket file."""
    if not path.is_absolute():
        return "right would be a whole path, such as ipc:///run/user/1000/tagstream.tags"
    if len(bytes(path)) > PATH_BYTES:
        return f"{len(bytes(path))} bytes long; right would be a path of at most {PATH_BYTES}"
    return None


def zmq_problem(address: str, binds: bool) -> str | None:
    """What is wrong with an address of ZeroMQ, by its looks."""
    path = ipc_path(address)
    if path is not None:
        return path_problem(path)
    found = _TCP.fullmatch(address)
    if found is None:
        return "right would be tcp://HOST:PORT or ipc:///PATH, such as tcp://127.0.0.1:5570"
    if not binds and "*" in (found["host"], found["port"]):
        return "right would be one host and one port to connect to; * is for binding"
    if found["port"] != "*" and not 1 <= int(found["port"]) <= 65535:
        return "right would be a port from 1 to 65535"
    return None


def host_port_problem(text: str, binds: bool) -> str | None:
    """What is wrong with HOST:PORT, by its looks. Port 0, for binding: any free one."""
    found = _HOST_PORT.fullmatch(text)
    if found is None or found["host"] == "*":
        return "right would be HOST:PORT, such as 127.0.0.1:7700"
    if not (0 if binds else 1) <= int(found["port"]) <= 65535:
        return "right would be a port from 1 to 65535"
    return None


def address_problems(parts: Mapping[str, Any]) -> Iterator[str]:
    """Sentences for the addresses of sections that are right in themselves."""
    feed, security = parts.get("feed"), parts.get("security")
    if isinstance(feed, ZmqFeed):
        yield from _of_zmq_feed(feed, security)
    elif isinstance(feed, TcpFeed):
        yield from _of_tcp_feed(feed)
    for key in ("publish", "control"):
        section = parts.get(key)
        if section is not None and section.address != AUTO:
            yield from _bound(f"[{key}] address", section.address, security)
        elif section is not None and key == "publish":
            yield f'[publish] address: found "{AUTO}"; {zmq_problem(AUTO, True)}'
    if (metrics := parts.get("metrics")) is not None:
        yield from _of_metrics(metrics.listen)


def _bound(where: str, address: str, security: Security | None) -> Iterator[str]:
    if problem := zmq_problem(address, binds=True):
        yield f"{where}: found {shown(address)}; {problem}"
    elif not near(address) and (security is None or security.authorised is None):
        yield f"{where}: found {shown(address)}; {NEEDS_AUTHORISED}"


def _of_zmq_feed(feed: ZmqFeed, security: Security | None) -> Iterator[str]:
    where = "[feed] address"
    if feed.bind:
        yield from _bound(where, feed.address, security)
        if feed.server_key is not None:
            yield "[feed] server_key: not used with bind = true; right would be one of the two"
    elif problem := zmq_problem(feed.address, binds=False):
        yield f"{where}: found {shown(feed.address)}; {problem}"
    elif feed.server_key is None and not near(feed.address):
        yield f"{where}: found {shown(feed.address)}; {NEEDS_SERVER_KEY}"
    elif feed.server_key is not None and ipc_path(feed.address) is not None:
        yield "[feed] server_key: not used with ipc://, where the file decides who may come in"
    elif feed.server_key is not None and security is None:
        yield f"[feed] server_key: {NEEDS_OWN_KEYS}"


def _of_tcp_feed(feed: TcpFeed) -> Iterator[str]:
    for key, text in (("listen", feed.listen), ("connect", feed.connect)):
        if text is not None and (problem := host_port_problem(text, binds=key == "listen")):
            yield f"[feed] {key}: found {shown(text)}; {problem}"


def _of_metrics(listen: str) -> Iterator[str]:
    where = f"[metrics] listen: found {shown(listen)}"
    if problem := host_port_problem(listen, binds=True):
        yield f"{where}; {problem}"
    elif not near(listen):
        yield (
            f"{where}; others can reach it, and nothing asks who they are; right would be an"
            " address of this machine, such as 127.0.0.1:9464"
        )
