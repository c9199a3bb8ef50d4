"""Who is let in: answers ZeroMQ when a peer shows its key (ZAP, RFC 27 of ZeroMQ)."""

from __future__ import annotations

import threading
from collections.abc import Sequence
from pathlib import Path

import zmq
from zmq.utils import z85

from tagstream.errors import SettingsError
from tagstream.security.keys import load_authorised

ENDPOINT = "inproc://zeromq.zap.01"
DOMAIN = b"tagstream"  # a socket with a domain is asked about, whatever its mechanism
LOOK_MS = 100
_ALLOW, _DENY = (b"200", b"OK"), (b"400", b"not authorised")


class Admission:
    """Lets in whose public key lies in a folder, for all sockets of a context that ask.

    The folder is read anew for each peer, so that a key put there works at once, and one taken
    away lets in no more (who is in stays in). Start it before a socket is bound; close it
    after the sockets and before the context. Without a folder nobody is let in.
    """

    def __init__(self, context: zmq.Context[zmq.Socket[bytes]], folder: Path | None) -> None:
        if folder is not None:
            load_authorised(folder)  # what is broken is told now, not to a peer
        self._context, self._folder = context, folder
        self._stop, self._ready = threading.Event(), threading.Event()
        self._failed: zmq.ZMQError | None = None
        self.admitted = 0
        self.denied = 0
        self.last_denied = ""  # address and public key of the last one who was not let in
        self._thread = threading.Thread(target=self._run, name="admission", daemon=True)
        self._thread.start()
        self._ready.wait()
        if self._failed is not None:
            raise self._failed

    def close(self) -> None:
        """Let in nobody any more."""
        self._stop.set()
        self._thread.join()

    def _run(self) -> None:
        with self._context.socket(zmq.REP) as requests:
            requests.linger = 0
            try:
                requests.bind(ENDPOINT)
            except zmq.ZMQError as error:
                self._failed = error
                return
            finally:
                self._ready.set()
            while not self._stop.is_set():
                if requests.poll(LOOK_MS):
                    requests.send_multipart(self._answer(requests.recv_multipart()))

    def _answer(self, request: Sequence[bytes]) -> list[bytes]:
        """Frames: version, request id, domain, address, identity, mechanism, credentials."""
        version, number = request[0], request[1] if len(request) > 1 else b""
        known = len(request) == 7 and request[5] == b"CURVE" and len(request[6]) == 32
        public = z85.encode(request[6]) if known else b""
        allowed = known and public in self._authorised()
        if allowed:
            self.admitted += 1
        else:
            self.denied += 1
            address = request[3].decode(errors="replace") if len(request) > 3 else ""
            self.last_denied = f"{address} {public.decode() or 'without a key'}"
        return [version, number, *(_ALLOW if allowed else _DENY), public, b""]

    def _authorised(self) -> frozenset[bytes]:
        if self._folder is None:
            return frozenset()
        try:
            return load_authorised(self._folder)
        except (SettingsError, OSError):
            return frozenset()  # a folder that someone is just changing
