"""The same tags and settings give the same integers, however they arrive."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import h5py
import numpy as np
import pytest

from tagstream.recording import RecordingReader, RecordingWriter
from tests.flow.conftest import Caller


def integers(run: Path) -> dict[str, np.ndarray]:
    """Every integer and floating-point array of the tallies and estimates of a run."""
    found: dict[str, np.ndarray] = {}
    counted = (
        "received",
        "kept",
        "dropped_",
        "in_flight",
        "gap",
        "largest_disorder",
        "last_tag_ps",
    )
    tallied = ("run/hbt", "run/estimates", "run/channels")
    wanted = (*tallied, *(f"run/health/{name}" for name in counted))

    def take(name: str, node: h5py.Group | h5py.Dataset) -> None:
        if isinstance(node, h5py.Dataset) and name.startswith(wanted):
            found[name] = np.asarray(node[()])

    with h5py.File(run / "latest.h5") as file:
        file.visititems(take)
    return found


def assert_same(a: dict[str, np.ndarray], b: dict[str, np.ndarray]) -> None:
    assert a.keys() == b.keys()
    assert len(a) > 40
    for name in a:
        assert np.array_equal(a[name], b[name], equal_nan=a[name].dtype.kind == "f"), name


@pytest.fixture
def reference(settings: Path, recording: Path, tagstream: Caller) -> dict[str, np.ndarray]:
    assert tagstream("replay", settings, recording, "--name", "reference").code == 0
    return integers(settings.parent / "runs/reference")


def test_a_replay_equals_the_simulation_it_recorded(
    settings: Path, reference: dict[str, np.ndarray], tagstream: Caller
) -> None:
    assert tagstream("run", settings, "--name", "live").code == 0
    assert_same(integers(settings.parent / "runs/live"), reference)


@pytest.mark.parametrize("tags", [1 << 10, 12_345])
def test_the_size_of_pieces_changes_nothing(
    settings: Path,
    recording: Path,
    reference: dict[str, np.ndarray],
    tagstream: Caller,
    tags: int,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr("tagstream.recording.reader.CHUNK_EVENTS", tags)
    assert tagstream("replay", settings, recording, "--name", "pieces").code == 0
    assert_same(integers(settings.parent / "runs/pieces"), reference)


def test_pace_changes_nothing(
    settings: Path, recording: Path, reference: dict[str, np.ndarray], tagstream: Caller
) -> None:
    assert tagstream("replay", settings, recording, "--name", "paced", "--pace", "3").code == 0
    assert_same(integers(settings.parent / "runs/paced"), reference)


def test_other_delays_on_replay_move_the_histogram(
    settings: Path, recording: Path, reference: dict[str, np.ndarray], tagstream: Caller
) -> None:
    delay = 'channels.arm_b.delay="25 ns"'
    assert tagstream("replay", settings, recording, "--set", delay, "--name", "moved").code == 0
    moved = integers(settings.parent / "runs/moved")["run/hbt/counts"]
    # Only pairs at the edges of the run or of a slice can differ.
    assert np.abs(moved[25:] - reference["run/hbt/counts"][:-25]).sum() <= 2


def test_a_replay_names_the_run_that_it_replays(
    settings: Path, recording: Path, tagstream: Caller
) -> None:
    assert tagstream("replay", settings, recording).code == 0
    with h5py.File(recording) as made, h5py.File(settings.parent / "runs/flow/latest.h5") as run:
        made_uuid = made["run/entry_identifier_uuid"].asstr()[()]
        assert run["run/recorded_uuid"].asstr()[()] == made_uuid
        assert run["run/run_uuid"].asstr()[()] != made_uuid


def test_segments_of_one_run_replay_as_one(
    settings: Path, recording: Path, reference: dict[str, np.ndarray], tagstream: Caller
) -> None:
    with RecordingReader(recording) as whole:
        header, pieces = whole.header, list(whole.pieces())
    paths = [settings.parent / "part-2.h5", settings.parent / "part-1.h5"]
    for number, path in ((1, paths[1]), (2, paths[0])):
        with RecordingWriter(
            path, tick=Fraction(1), header=replace(header, segment=number)
        ) as writer:
            for piece in pieces[:2] if number == 1 else pieces[2:]:
                writer.add(
                    piece.times_ps, piece.inputs, piece.begin_ps, piece.end_ps, piece.complete
                )
    assert len(pieces) > 2 or all(piece.complete for piece in pieces)
    assert tagstream("replay", settings, *paths, "--name", "parts").code == 0
    assert_same(integers(settings.parent / "runs/parts"), reference)
