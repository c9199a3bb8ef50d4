"""Reading a run by its contract names, live or finished, and being told what there is."""

from __future__ import annotations

import os
import shutil
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest

import tagstream
from tagstream.errors import ResultsError
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.history import History
from tagstream.outputs.reader import Run, open_run
from tagstream.outputs.run_writer import RunWriter
from tests.fakes_outputs import (
    FakeClock,
    make_estimates,
    make_header,
    make_profile,
    make_row,
    make_snapshot,
)

ROWS = 4


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """A finished run of four slices; beside it the link to it."""
    header = make_header(truth={"g2_zero": 0.04, "source": "emitter"})
    writer = RunWriter(RunFolder.create(tmp_path / "runs", "run"), header)
    for index in range(ROWS):
        writer.add_row(make_row(index))
    writer.close(make_snapshot(ROWS))
    return writer.folder.path


@pytest.fixture
def run(folder: Path) -> Run:
    return open_run(folder)


def test_it_is_what_the_package_offers() -> None:
    assert tagstream.open_run is open_run


def test_a_run_opens_by_folder_link_latest_and_text(folder: Path) -> None:
    link = folder.parent / "run"
    for path in (folder, link, folder / "latest.h5", link / "latest.h5", str(link)):
        assert open_run(path).path == folder.resolve()


def test_a_run_opens_from_inside_its_folder(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(folder)
    assert open_run("latest.h5").path == open_run(".").path == folder.resolve()


def test_an_opened_run_stays_the_same_when_the_link_moves_on(folder: Path) -> None:
    run = open_run(folder.parent / "run")
    newer = RunWriter(RunFolder.create(folder.parent, "run"), make_header(title="newer"))
    newer.close(make_snapshot())
    assert run.about["title"] == "a run made by hand"
    assert open_run(folder.parent / "run").about["title"] == "newer"


@pytest.mark.parametrize("name", ["absent", "", "settings.toml", "run-0001/history-0001.h5"])
def test_what_is_no_run_is_told_with_what_would_be_right(folder: Path, name: str) -> None:
    path = folder.parent / name
    with pytest.raises(ResultsError, match=r"no run: a folder that holds a latest\.h5") as caught:
        open_run(path)
    assert str(path) in str(caught.value)


def test_estimates_come_back_bit_for_bit(run: Run) -> None:
    expected = make_estimates(ROWS)
    assert list(run.estimates) == ["g2_zero", "rate_a"]
    for name, spans in expected.items():
        assert list(run.estimates[name]) == ["run", "10 s"]
        for span, estimate in zip(("run", "10 s"), spans, strict=True):
            found = run.estimates[name][span]
            # through repr: a nan equals no other nan
            assert repr(found) == repr(replace(estimate, unit="Hz" if name == "rate_a" else "1"))


def test_tallies_come_back_bit_for_bit(run: Run) -> None:
    assert list(run.tallies) == ["hbt"]
    assert list(run.tallies["hbt"]) == ["run", "10 s"]
    for view in make_snapshot().spans:
        found = run.tallies["hbt"][view.name]
        for name, values in view.tallies["hbt"].items():
            assert found[name].dtype == values.dtype
            assert np.array_equal(found[name], np.broadcast_to(values, found[name].shape))
        assert float(found["live_time_s"]) == 1.0


def test_channels_health_truth_and_about(run: Run) -> None:
    channel = run.channels["arm_a"]["10 s"]
    assert channel["counts"] == 2**53 + 1
    assert isinstance(channel["counts"], int)
    assert channel["live_time_ps"] == 10**12
    assert (channel["begin_ps"], channel["end_ps"]) == (0, 10**12)
    assert run.health == {**make_snapshot(ROWS).health, "gap_time_s": 1.5}
    assert run.truth == {"g2_zero": 0.04, "source": "emitter"}
    assert run.about["settings"] == make_header().settings_text
    assert run.about["origin_ticks"] == 7
    assert run.about["pid"] == os.getpid()


def test_a_run_of_real_light_has_no_truth(tmp_path: Path) -> None:
    RunWriter(RunFolder.create(tmp_path, "run"), make_header()).close(make_snapshot())
    assert open_run(tmp_path / "run").truth == {}


def test_the_history_is_the_rows_bit_for_bit(run: Run) -> None:
    for position, span in enumerate(("run", "10 s")):
        found = run.history("g2_zero", span=span)
        rows = [make_row(index) for index in range(ROWS)]
        assert found["begin_ps"].tolist() == [row.begin_ps for row in rows]
        assert found["end_ps"].tolist() == [row.end_ps for row in rows]
        assert found["live_time_ps"].tolist() == [row.live_time_ps for row in rows]
        assert found["time_s"].tolist() == [1.0, 2.0, 3.0, 4.0]
        for column in ("value", "lower", "upper"):
            expected = [getattr(row.estimates["g2_zero"][position], column) for row in rows]
            assert np.array_equal(found[column], expected, equal_nan=True)
        assert (np.diff(found["utc"]) >= 0).all()
        assert found["begin_ps"].dtype == found["live_time_ps"].dtype == np.int64
        assert len({values.shape for values in found.values()}) == 1


def test_the_span_of_a_history_is_the_run_unless_said_otherwise(run: Run) -> None:
    assert np.array_equal(run.history("g2_zero")["value"], run.history("g2_zero", "run")["value"])


def test_files_with_other_columns_are_joined_by_name_and_absent_is_nan(
    folder: Path, run: Run
) -> None:
    second = make_header(
        channels=("arm_b", "arm_c", "arm_a"), spans=("run",), estimates={"rate_a": "Hz"}
    )
    more = History(folder / "history-0002.h5", second, FakeClock())
    for index in (10, 11):
        row = make_row(index)
        more.add(
            replace(
                row,
                counts=np.zeros(3, np.int64),
                estimates={"rate_a": row.estimates["rate_a"][:1]},
            )
        )
    more.close()
    rate = run.history("rate_a")
    assert rate["value"].tolist() == [1000.0, 1001.0, 1002.0, 1003.0, 1010.0, 1011.0]
    assert rate["begin_ps"].tolist() == [slice_ * 10**12 for slice_ in (0, 1, 2, 3, 10, 11)]
    absent = run.history("g2_zero")["value"]
    assert np.isnan(absent).tolist() == [False] * ROWS + [True] * 2
    assert np.isnan(run.history("rate_a", "10 s")["lower"]).tolist() == [False] * ROWS + [True] * 2
    assert rate["utc"].size == 6


def test_a_missing_history_is_told(folder: Path, run: Run) -> None:
    (folder / "history-0001.h5").unlink()
    with pytest.raises(ResultsError, match=r"no history-\*\.h5 in this run"):
        run.history("g2_zero")


@pytest.mark.parametrize("name", ["latest.h5", "history-0001.h5"])
def test_a_damaged_file_is_told_with_its_name(folder: Path, run: Run, name: str) -> None:
    path = folder / name
    path.write_bytes(path.read_bytes()[:500])
    with pytest.raises(ResultsError, match="not readable as results of a run") as caught:
        run.history("g2_zero")
    assert str(path.resolve()) in str(caught.value)


@pytest.mark.parametrize("lost", [1, 500, 5000])
def test_a_cut_off_copy_of_a_growing_history_is_told_and_not_waited_for(
    tmp_path: Path, lost: int
) -> None:
    writer = RunWriter(RunFolder.create(tmp_path, "run"), make_header())
    writer.add_row(make_row(0))
    writer.replace_snapshot(make_snapshot())
    writer.settle()
    copied = shutil.copytree(tmp_path / "run-0001", tmp_path / "copied")
    writer.close(make_snapshot())
    assert open_run(copied).history("rate_a")["value"].tolist() == [1000.0]
    content = (copied / "history-0001.h5").read_bytes()
    (copied / "history-0001.h5").write_bytes(content[:-lost])
    with pytest.raises(ResultsError, match=r"history-0001\.h5.*its end is missing"):
        open_run(copied).history("rate_a")


@pytest.mark.parametrize("groups", [(), ("run",), ("run", "run/estimates/g2_zero")])
def test_a_latest_of_another_program_is_told(tmp_path: Path, groups: tuple[str, ...]) -> None:
    with h5py.File(tmp_path / "latest.h5", "w") as file:
        for group in groups:
            file.create_group(group)
    run = open_run(tmp_path)
    with pytest.raises(ResultsError, match=r"latest\.h5: not readable as results of a run"):
        run.estimates  # noqa: B018


def test_a_key_error_names_what_there_is(run: Run) -> None:
    for ask, names in (
        (lambda: run.estimates["g3"], "no estimate 'g3'; there are: g2_zero, rate_a"),
        (lambda: run.estimates["g2_zero"]["1 h"], "no span '1 h'; there are: run, 10 s"),
        (lambda: run.tallies["g2_zero"], "no tally 'g2_zero'; there are: hbt"),
        (lambda: run.tallies["hbt"]["10s"], "no span '10s'; there are: run, 10 s"),
        (lambda: run.channels["arm_c"], "no channel 'arm_c'; there are: arm_a, arm_b"),
        (lambda: run.history("g3"), "no estimate 'g3'; there are: g2_zero, rate_a"),
        (lambda: run.history("g2_zero", "1 h"), "no span '1 h'; there are: run, 10 s"),
        (lambda: run.profile("g3"), "no estimate 'g3'; there are: g2_zero, rate_a"),
    ):
        with pytest.raises(KeyError) as caught:
            ask()
        assert caught.value.args == (names,)


def test_mappings_behave_like_mappings(run: Run) -> None:
    assert run.estimates.get("g3") is None
    assert "g2_zero" in run.estimates
    assert len(run.channels) == 2
    assert repr(run.estimates) == "<estimate: g2_zero, rate_a>"
    assert repr(run) == f"Run({str(run.path)!r})"


def test_before_the_first_slice_there_are_names_but_no_numbers(tmp_path: Path) -> None:
    writer = RunWriter(RunFolder.create(tmp_path, "run"), make_header())
    run = open_run(tmp_path / "run")
    assert run.is_live
    assert list(run.estimates) == ["g2_zero", "rate_a"]
    assert len(run.estimates["g2_zero"]) == len(run.tallies) == 0
    assert run.history("g2_zero", "10 s")["value"].size == 0
    assert run.profile("g2_zero") == {}
    writer.close(make_snapshot())
    assert not run.is_live
    assert len(run.estimates["g2_zero"]) == 2  # the same object reads anew


def test_the_profile_of_an_estimate(run: Run) -> None:
    found = run.profile("g2_zero")
    for name, values in make_profile().items():
        assert np.array_equal(found[name], values)
    assert run.profile("rate_a") == {}


def test_reading_needs_no_right_to_write_and_changes_nothing(folder: Path, run: Run) -> None:
    def contents() -> dict[str, bytes]:
        return {path.name: path.read_bytes() for path in folder.iterdir()}

    before = contents()
    for path in folder.iterdir():
        path.chmod(0o444)
    folder.chmod(0o555)
    try:
        assert run.history("g2_zero")["value"].size == ROWS
        assert run.estimates["g2_zero"]["run"].counts == 40
        assert not run.is_live
    finally:
        folder.chmod(0o755)
    assert contents() == before


def test_a_copied_run_is_a_run(folder: Path, tmp_path: Path) -> None:
    shutil.copytree(folder, tmp_path / "taken-home")
    assert open_run(tmp_path / "taken-home").history("rate_a")["value"].size == ROWS
