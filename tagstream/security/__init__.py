"""Sockets that only those reach who may: keys, who is let in, private socket files.

Shared by all that talk over ZeroMQ. `Sockets` is all they need.
"""

from __future__ import annotations

from tagstream.security.keys import KeyFiles, Keys, make_keys
from tagstream.security.sockets import Sockets, control_address

__all__ = ["KeyFiles", "Keys", "Sockets", "control_address", "make_keys"]
