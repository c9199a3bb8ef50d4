"""ZeroMQ sockets with what protects them: keys over TCP, private files on this machine."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Protocol

import zmq

from tagstream.errors import InputError, SettingsError
from tagstream.security.admission import DOMAIN, Admission
from tagstream.security.keys import CLIENT, SERVER, load_private, load_public
from tagstream.security.private_path import PrivatePath
from tagstream.settings.addresses import (
    AUTO,
    IPC,
    NEEDS_AUTHORISED,
    NEEDS_OWN_KEYS,
    NEEDS_SERVER_KEY,
    ipc_path,
    path_problem,
    zmq_problem,
)
from tagstream.settings.doors import near

Socket = zmq.Socket[bytes]
_KEEPALIVE = {  # a peer that vanished is noticed by the system, not by silence
    zmq.TCP_KEEPALIVE: 1,
    zmq.TCP_KEEPALIVE_IDLE: 30,
    zmq.TCP_KEEPALIVE_INTVL: 10,
    zmq.TCP_KEEPALIVE_CNT: 3,
}


class SecuritySettings(Protocol):
    """The section [security]."""

    @property
    def own_keys(self) -> Path: ...

    @property
    def authorised(self) -> Path | None: ...


class Sockets:
    """Makes, binds and connects sockets; closes them in the right order.

    All of it belongs to one thread. security: the section [security], or None.
    With a folder of authorised keys, each TCP address that is bound asks for one, near or far.
    """

    def __init__(self, security: SecuritySettings | None = None) -> None:
        self._security = security
        self._context: zmq.Context[Socket] | None = None
        self._sockets: list[Socket] = []
        self._paths: list[PrivatePath] = []
        self._admission: Admission | None = None

    def open(self, kind: int) -> Socket:
        """A socket that never waits for peers when it is closed."""
        if self._context is None:
            self._context = zmq.Context()
        socket = self._context.socket(kind)
        socket.linger = 0
        for option, value in _KEEPALIVE.items():
            socket.setsockopt(option, value)
        self._sockets.append(socket)
        return socket

    def bind(self, socket: Socket, address: str) -> str:
        """Bind a socket, and return where: a port that was `*` is chosen.

        Raises SettingsError for an address or keys that are not right, InputError when the
        address is taken, RunBusyError when another process holds the path.
        """
        _check(address, binds=True)
        path = ipc_path(address)
        if path is not None:
            private = PrivatePath(path)
            self._paths.append(private)
            _call(address, private.bind, socket)
        else:
            self._secure_server(socket, address)
            _call(address, socket.bind, address)
        return str(socket.getsockopt_string(zmq.LAST_ENDPOINT)).rstrip("\0")

    def connect(self, socket: Socket, address: str, server_key: Path | None = None) -> None:
        """Connect a socket; with the public key of the peer, both sides prove who they are.

        Raises SettingsError for an address or keys that are not right.
        """
        _check(address, binds=False)
        if server_key is not None:
            self._secure_client(socket, server_key)
        elif not near(address):
            raise SettingsError([f"{address}: {NEEDS_SERVER_KEY}"])
        _call(address, socket.connect, address)

    @property
    def admitted(self) -> int:
        """Peers that were let in."""
        return 0 if self._admission is None else self._admission.admitted

    @property
    def denied(self) -> int:
        """Peers that were not let in: their key is not authorised."""
        return 0 if self._admission is None else self._admission.denied

    @property
    def last_denied(self) -> str:
        """Address and public key of the last one who was not let in."""
        return "" if self._admission is None else self._admission.last_denied

    def close(self) -> None:
        """Close all sockets, then what protected them."""
        for socket in self._sockets:
            socket.close(0)
        for path in self._paths:
            path.close()
        if self._admission is not None:
            self._admission.close()
        if self._context is not None:
            self._context.term()
        self._context = None
        self._sockets.clear()
        self._paths.clear()

    def __enter__(self) -> Sockets:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def _secure_server(self, socket: Socket, address: str) -> None:
        security = self._security
        if security is None or security.authorised is None:
            if near(address):
                return
            raise SettingsError([f"{address}: {NEEDS_AUTHORISED}"])
        own = load_private(security.own_keys, SERVER)
        if self._admission is None:
            self._admission = Admission(socket.context, security.authorised)
        socket.curve_secretkey, socket.curve_publickey = own.secret, own.public
        socket.curve_server = True
        socket.zap_domain = DOMAIN

    def _secure_client(self, socket: Socket, server_key: Path) -> None:
        if self._security is None:
            raise SettingsError([f"{server_key}: {NEEDS_OWN_KEYS}"])
        own = load_private(self._security.own_keys, CLIENT)
        socket.curve_secretkey, socket.curve_publickey = own.secret, own.public
        socket.curve_serverkey = load_public(server_key)


def control_address(
    address: str, name: str, environment: Mapping[str, str] = os.environ
) -> tuple[str | None, str]:
    """(address of the control socket of a run, note): "auto" becomes a private socket file.

    None, with the reason as the note, where there is no folder for it or the path is too long.
    """
    if address != AUTO:
        return address, ""
    runtime = environment.get("RUNTIME_DIRECTORY", "").split(":")[0]
    user = environment.get("XDG_RUNTIME_DIR", "")
    if runtime:
        path = Path(runtime) / f"{name}.control"
    elif user:
        path = Path(user) / "tagstream" / f"{name}.control"
    else:
        return None, (
            "[control] is off: neither RUNTIME_DIRECTORY nor XDG_RUNTIME_DIR names a folder for"
            ' its socket; give [control] address = "ipc:///PATH"'
        )
    if problem := path_problem(path):
        return None, f"[control] is off: {path}: {problem}; give [control] address"
    return f"{IPC}{path}", ""


def _check(address: str, binds: bool) -> None:
    if problem := zmq_problem(address, binds):
        raise SettingsError([f"{address}: {problem}"])


def _call(address: str, function: Callable[..., object], argument: object) -> None:
    try:
        function(argument)
    except zmq.ZMQError as error:
        advice = "another process uses it" if error.errno == zmq.EADDRINUSE else error.strerror
        raise InputError(
            f"{address}: cannot be used: {advice}; stop what uses it, or choose another address"
        ) from None
