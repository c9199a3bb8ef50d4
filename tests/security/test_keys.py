"""Key files: who can read them, and what is said when they are not right."""

from __future__ import annotations

from pathlib import Path

import pytest
import zmq.auth

from tagstream.errors import SettingsError
from tagstream.security.keys import (
    CLIENT,
    SERVER,
    KeyFiles,
    load_authorised,
    load_private,
    load_public,
    make_keys,
)


@pytest.fixture
def files(tmp_path: Path) -> KeyFiles:
    return make_keys(tmp_path / "new" / "keys")


def mode(path: Path) -> int:
    return path.stat().st_mode & 0o777


def test_private_keys_are_for_their_owner_alone(files: KeyFiles) -> None:
    assert mode(files.folder) == mode(files.authorised) == 0o700
    assert mode(files.private(SERVER)) == mode(files.private(CLIENT)) == 0o600
    assert all(path.is_file() for path in files.all)


@pytest.mark.parametrize("side", [SERVER, CLIENT])
def test_keys_are_read_as_they_were_made_here_and_elsewhere(files: KeyFiles, side: str) -> None:
    keys = load_private(files.folder, side)
    assert zmq.curve_public(keys.secret) == keys.public == load_public(files.public(side))
    assert zmq.auth.load_certificate(files.private(side)) == (keys.public, keys.secret)
    assert b"secret-key" not in files.public(side).read_bytes()
    assert keys.secret.decode() not in repr(keys)


def test_the_client_that_was_made_along_may_come_in(files: KeyFiles) -> None:
    client = load_private(files.folder, CLIENT)
    assert load_authorised(files.authorised) == {client.public}


def test_keys_that_are_there_are_never_replaced(files: KeyFiles) -> None:
    before = files.private(CLIENT).read_bytes()
    files.private(SERVER).unlink()
    with pytest.raises(SettingsError, match="exists already and is not replaced"):
        make_keys(files.folder)
    assert not files.private(SERVER).exists()
    assert files.private(CLIENT).read_bytes() == before


def test_where_no_folder_can_be_is_told(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(SettingsError, match="keys cannot be made"):
        make_keys(tmp_path / "file" / "keys")


@pytest.mark.parametrize("bits", [0o640, 0o604, 0o620])
def test_a_private_key_that_others_reach_is_refused(files: KeyFiles, bits: int) -> None:
    files.private(SERVER).chmod(bits)
    with pytest.raises(SettingsError, match="chmod 600"):
        load_private(files.folder, SERVER)


@pytest.mark.parametrize(
    "content", [b"", b"curve\n", b"\xff\xfe", b'    public-key = "short"\n'], ids=repr
)
def test_a_file_that_is_no_key_is_told(files: KeyFiles, content: bytes) -> None:
    files.public(SERVER).write_bytes(content)
    with pytest.raises(SettingsError, match="holds no public key"):
        load_public(files.public(SERVER))
    files.private(SERVER).write_bytes(content)
    with pytest.raises(SettingsError, match="key"):
        load_private(files.folder, SERVER)


def test_a_pair_that_does_not_belong_together_is_told(files: KeyFiles) -> None:
    client = load_private(files.folder, CLIENT)
    server = load_private(files.folder, SERVER)
    path = files.private(SERVER)
    path.write_bytes(path.read_bytes().replace(server.public, client.public))
    with pytest.raises(SettingsError, match="holds no private key"):
        load_private(files.folder, SERVER)


def test_what_is_missing_is_told(tmp_path: Path) -> None:
    with pytest.raises(SettingsError, match=r"server\.private: this key cannot be read"):
        load_private(tmp_path, SERVER)
    with pytest.raises(SettingsError, match="is no folder"):
        load_authorised(tmp_path / "nobody")
