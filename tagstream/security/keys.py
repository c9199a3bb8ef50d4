"""Key files: made once, private ones readable by their owner alone, checked when loaded.

A file holds lines such as `public-key = "..."` below the word `curve`, as other programs that use
ZeroMQ write and read them.
"""

from __future__ import annotations

import os
import re
import stat
from dataclasses import dataclass
from pathlib import Path

import zmq

from tagstream.errors import SettingsError

PUBLIC, PRIVATE = ".public", ".private"
SERVER, CLIENT = "server", "client"  # the side that binds, and the side that connects
AUTHORISED = "authorised"
_LINE = re.compile(r'^\s*(public|secret)-key\s*=\s*"([!-~]{40})"\s*$', re.MULTILINE)
_SIZE = 10_000  # bytes; a key file is far smaller


@dataclass(frozen=True, slots=True)
class Keys:
    """A pair of keys in the text form of ZeroMQ. `secret` is never shown."""

    public: bytes
    secret: bytes

    def __repr__(self) -> str:
        return f"Keys(public={self.public!r})"


@dataclass(frozen=True, slots=True)
class KeyFiles:
    """The files that `make_keys` makes."""

    folder: Path

    def private(self, side: str) -> Path:
        """The private key of a side."""
        return self.folder / (side + PRIVATE)

    def public(self, side: str) -> Path:
        """The public key of a side."""
        return self.folder / (side + PUBLIC)

    @property
    def authorised(self) -> Path:
        """The folder with the public keys of those who may come in."""
        return self.folder / AUTHORISED

    @property
    def authorised_client(self) -> Path:
        """The public key of the client that was made along, already let in."""
        return self.authorised / (CLIENT + PUBLIC)

    @property
    def all(self) -> list[Path]:
        """All of them."""
        pairs = [(self.private(side), self.public(side)) for side in (SERVER, CLIENT)]
        return [*pairs[0], *pairs[1], self.authorised_client]


def make_keys(folder: Path) -> KeyFiles:
    """A pair of keys for the side that binds and one for the side that connects.

    Raises SettingsError, with nothing changed, when a key is there already.
    """
    files = KeyFiles(folder)
    if there := [path for path in files.all if os.path.lexists(path)]:
        raise SettingsError(
            [f"{path}: exists already and is not replaced; choose another folder" for path in there]
        )
    try:
        for made in (folder, files.authorised):
            made.mkdir(mode=0o700, parents=True, exist_ok=True)
        folder.chmod(0o700)
        for side in (SERVER, CLIENT):
            _make_pair(files, side)
    except OSError as error:
        raise SettingsError(
            [f"{folder}: keys cannot be made: {error.strerror}; choose another folder"]
        ) from None
    return files


def _make_pair(files: KeyFiles, side: str) -> None:
    public, secret = (key.decode() for key in zmq.curve_keypair())
    public_line, secret_line = f'    public-key = "{public}"\n', f'    secret-key = "{secret}"\n'
    note = f"# Private key of the {side} side of tagstream. Show it to nobody.\n"
    _write(files.private(side), f"{note}curve\n{public_line}{secret_line}", 0o600)
    text = f"# Public key of the {side} side of tagstream.\ncurve\n{public_line}"
    _write(files.public(side), text, 0o644)
    if side == CLIENT:
        _write(files.authorised_client, text, 0o644)


def _write(path: Path, text: str, mode: int) -> None:
    handle = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL | os.O_NOFOLLOW, mode)
    with os.fdopen(handle, "w") as file:
        file.write(text)


def load_private(folder: Path, side: str) -> Keys:
    """The pair of a side. Raises SettingsError when it is missing, broken or open to others."""
    path = KeyFiles(folder).private(side)
    text = _read(path)
    mode = stat.S_IMODE(path.stat().st_mode)
    if mode & 0o077:
        raise SettingsError(
            [
                f"{path}: a private key that others can read (mode {mode:03o});"
                f" right would be: chmod 600 {path}"
            ]
        )
    found = dict(_LINE.findall(text))
    if "public" not in found or "secret" not in found:
        raise _no_key(path, "private")
    keys = Keys(found["public"].encode(), found["secret"].encode())
    if not _fit(keys):
        raise _no_key(path, "private")
    return keys


def load_public(path: Path) -> bytes:
    """A public key. Raises SettingsError when it is missing or broken."""
    found = dict(_LINE.findall(_read(path)))
    if "public" not in found:
        raise _no_key(path, "public")
    return str(found["public"]).encode()


def load_authorised(folder: Path) -> frozenset[bytes]:
    """The public keys in a folder, of all files NAME.public.

    Raises SettingsError when there is no such folder or a file in it is broken.
    """
    if not folder.is_dir():
        raise SettingsError(
            [
                f"[security] authorised: {folder} is no folder; right would be the folder with the"
                " public keys of those who may come in (tagstream keys FOLDER makes one)"
            ]
        )
    return frozenset(load_public(path) for path in sorted(folder.glob(f"*{PUBLIC}")))


def _fit(keys: Keys) -> bool:
    try:
        public: bytes = zmq.curve_public(keys.secret)
        return public == keys.public
    except (zmq.ZMQError, ValueError):
        return False


def _read(path: Path) -> str:
    try:
        with path.open(encoding="ascii") as file:
            return file.read(_SIZE)
    except OSError as error:
        raise SettingsError(
            [
                f"{path}: this key cannot be read: {error.strerror}; right would be a file that"
                " `tagstream keys FOLDER` made"
            ]
        ) from None
    except UnicodeDecodeError:
        raise _no_key(path, "public") from None


def _no_key(path: Path, kind: str) -> SettingsError:
    return SettingsError(
        [f"{path}: holds no {kind} key; right would be a file that `tagstream keys FOLDER` made"]
    )
