"""Which of some files or sockets have something to be read, asked with a limit in time."""

from __future__ import annotations

import select
from collections.abc import Iterable

_HUNG_UP = getattr(select, "POLLRDHUP", 0)  # the other end sends no more, though bytes may be left
_PROBLEM = select.POLLHUP | select.POLLERR | select.POLLNVAL


def ready(descriptors: Iterable[int], seconds: float) -> dict[int, int]:
    """The events of each descriptor that has some, after at most `seconds`."""
    poller = select.poll()
    for descriptor in descriptors:
        poller.register(descriptor, select.POLLIN | _HUNG_UP)
    return dict(poller.poll(max(seconds, 0.0) * 1000))


def writable(descriptor: int, seconds: float) -> bool:
    """Whether a descriptor can be written to, or has failed, after at most `seconds`."""
    poller = select.poll()
    poller.register(descriptor, select.POLLOUT)
    return bool(poller.poll(max(seconds, 0.0) * 1000))


def leaving(events: int) -> bool:
    """Whether the other end sends no more than what is here already."""
    return bool(events & (_HUNG_UP | _PROBLEM))
