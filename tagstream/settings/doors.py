"""Where a run can be reached from outside, and what protects it there, in words."""

from __future__ import annotations

from collections.abc import Iterator
from ipaddress import ip_address

from tagstream.settings.feeds import StdinFeed, TcpFeed, ZmqFeed
from tagstream.settings.sections import Settings

ENCRYPTED = "encrypted; only keys in [security] authorised may come in"
NEAR_ONLY = "only from this machine"
OPEN = "by anybody who reaches it: nothing here is authenticated or encrypted"


def doors(settings: Settings) -> list[str]:
    """A sentence for each address that is bound or connected to."""
    return [*doors_of_feed(settings), *_of_outputs(settings)]


def near(address: str) -> bool:
    """Whether only this machine can reach an address, with or without a transport before it."""
    transport, _, place = address.rpartition("://")
    host = place.rpartition(":")[0].strip("[]")
    try:
        return transport in ("ipc", "inproc") or ip_address(host).is_loopback
    except ValueError:
        return host == "localhost"


def doors_of_feed(settings: Settings) -> Iterator[str]:
    """Those of the feed alone."""
    feed = settings.feed
    if isinstance(feed, ZmqFeed):
        does = "is bound" if feed.bind else "is connected to"
        yield f"[feed] {feed.address} {does} for tags; {_zmq(feed.address, feed.bind, settings)}"
    elif isinstance(feed, TcpFeed) and feed.listen is not None:
        by = NEAR_ONLY if near(feed.listen) else OPEN
        yield f"[feed] {feed.listen} is bound for records; can be reached {by}"
    elif isinstance(feed, TcpFeed):
        yield f"[feed] {feed.connect} is connected to for records; raw TCP is not encrypted"
    elif isinstance(feed, StdinFeed):
        yield "[feed] records are read from standard input"


def _of_outputs(settings: Settings) -> Iterator[str]:
    if settings.publish is not None:
        address = settings.publish.address
        yield f"[publish] {address} is bound for messages; {_zmq(address, True, settings)}"
    if settings.control is not None:
        address = settings.control.address
        private = "a private socket file" if address == "auto" else _zmq(address, True, settings)
        yield f"[control] {address} is bound for requests; {private}"
    if settings.metrics is not None:
        listen = settings.metrics.listen
        by = NEAR_ONLY if near(listen) else OPEN
        yield f"[metrics] {listen} is bound for metrics; can be reached {by}"


def _zmq(address: str, binds: bool, settings: Settings) -> str:
    security = settings.security
    asks = security is not None and security.authorised is not None and address[:3] == "tcp"
    if near(address):
        return f"can be reached {NEAR_ONLY}" + (f"; {ENCRYPTED}" if binds and asks else "")
    if security is None:
        return f"can be reached {OPEN}"
    return ENCRYPTED if binds else "encrypted, by the key of the peer"
