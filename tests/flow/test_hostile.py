"""Broken inputs through the whole program: one clear message, the exit code, good tags kept."""

from __future__ import annotations

import json
from pathlib import Path

import h5py
import pytest
import tomli_w

from tests.flow.conftest import Caller
from tests.hostile import HOSTILE, HostileInput

REST = {
    "channels": {f"input_{n}": {"input": n} for n in range(4)},
    "results": {"folder": "runs", "name": "hostile"},
}


@pytest.mark.parametrize("case", HOSTILE, ids=lambda case: case.name)
def test_the_message_the_exit_code_and_what_was_good(
    case: HostileInput, tmp_path: Path, tagstream: Caller
) -> None:
    settings = tmp_path / "settings.toml"
    settings.write_text(tomli_w.dumps({"feed": case.table(tmp_path), **REST}))
    done = tagstream("run", settings)
    assert done.code == case.exit_code, done.err
    errors = [line for line in done.err.splitlines() if line.startswith("error: ")]
    assert len(errors) == 1, done.err
    assert all(word in errors[0] for word in case.words), errors[0]
    assert "Traceback" not in done.err
    run = tmp_path / "runs" / "hostile"
    if not case.good_tags:
        assert not run.exists()
        return
    with h5py.File(run / "latest.h5") as file:
        health = file["run/health"]
        assert health["received"][()] == case.good_tags
        assert health["state"].asstr()[()] == "input_broken"
    last = json.loads((run / "log.jsonl").read_text().splitlines()[-1])
    assert last["event"] == "end"
    assert last["error"] in errors[0]
