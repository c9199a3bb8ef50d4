"""The verb `keys`: what it makes, says and refuses."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path

from tests.flow.conftest import Caller


def test_keys_are_made_explained_and_never_replaced(tmp_path: Path, tagstream: Caller) -> None:
    folder = tmp_path / 'lab "7"'
    done = tagstream("keys", folder)
    assert done.code == 0, done.err
    lines = done.out[done.out.index("# settings of the side that binds") :]
    binds, connects = lines.split("# settings of a side that connects")
    assert tomllib.loads(binds)["security"] == {
        "keys": str(folder),
        "authorised": str(folder / "authorised"),
    }
    there = tomllib.loads(connects.partition("\n")[2])
    assert there["feed"]["server_key"] == str(folder / "server.public")
    secrets = [path.read_text().split('"')[3] for path in folder.glob("*.private")]
    assert len(secrets) == 2
    assert not any(secret in done.out for secret in secrets)
    again = tagstream("keys", folder)
    assert again.code == 2
    assert "exists already" in again.err


def test_scripts_get_the_files_as_json(tmp_path: Path, tagstream: Caller) -> None:
    told = json.loads(tagstream("keys", tmp_path / "keys", "--json").out)
    assert {Path(path).name for path in told} == {
        *("server.private", "server.public", "client.private", "client.public"),
    }
    assert all(Path(path).is_file() for path in told)
