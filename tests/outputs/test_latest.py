"""latest.h5 field by field, and what programs that know nothing of tagstream make of it."""

from __future__ import annotations

from collections.abc import Iterator
from math import nan
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from nexusformat.nexus import nxload
from silx.io.nxdata.parse import NXdata, get_default

from tagstream.outputs import RunHeader, Snapshot
from tagstream.outputs.latest import latest_image
from tagstream.outputs.recent import RecentValues
from tests.fakes_outputs import SPANS, make_estimates, make_header, make_row, make_snapshot

META: dict[str, str | int] = {
    "program_name": "tagstream",
    "version": "1.2",
    "run_uuid": "a-b-c",
    "start_time": "2026-12-01T10:00:00.000+00:00",
    "updated_utc": "2026-12-01T10:00:03.000+00:00",
    "host": "table-1",
    "pid": 17,
}
STARTING = Snapshot((), {}, {"state": "starting"})


def write(
    path: Path, header: RunHeader | None = None, snapshot: Snapshot | None = None, rows: int = 3
) -> Path:
    """A latest.h5 after `rows` slices."""
    header, snapshot = header or make_header(), snapshot or make_snapshot()
    recent = RecentValues(header.spans, header.slice_ps)
    for index in range(rows):
        recent.add(make_row(index))
    file = path / "latest.h5"
    file.write_bytes(latest_image(header, META, snapshot, recent))
    return file


@pytest.fixture
def entry(tmp_path: Path) -> Iterator[h5py.Group]:
    with h5py.File(write(tmp_path), "r") as file:
        yield file["run"]


def form(group: h5py.Group) -> dict[str, tuple[str, tuple[int, ...], str | None]]:
    """Name -> dtype, shape, unit of the datasets of a group."""
    return {
        name: (
            "text" if h5py.check_string_dtype(node.dtype) else node.dtype.str,
            node.shape,
            node.attrs.get("units"),
        )
        for name, node in group.items()
        if isinstance(node, h5py.Dataset)
    }


def attributes(node: h5py.Group) -> dict[str, Any]:
    return {k: v.tolist() if hasattr(v, "tolist") else v for k, v in node.attrs.items()}


def test_it_is_a_closed_file_with_superblock_2(tmp_path: Path) -> None:
    """The version stands in byte 8: HDF5 File Format Specification 3.0, section II.A."""
    content = write(tmp_path).read_bytes()
    assert content[:8] == b"\x89HDF\r\n\x1a\n"
    assert content[8] == 2
    assert content[11] == 0  # no writer has it open


def test_the_root_leads_to_the_entry_and_the_entry_to_the_first_tally(entry: h5py.Group) -> None:
    assert attributes(entry.parent) == {"NX_class": "NXroot", "default": "run"}
    assert attributes(entry) == {"NX_class": "NXentry", "default": "hbt"}
    assert sorted(entry.parent) == ["run"]


def test_the_entry_says_which_run_it_is(entry: h5py.Group) -> None:
    texts = dict.fromkeys(("title", "settings", "tick", "origin_utc", *META), "text")
    del texts["version"]
    expected: dict[str, Any] = {name: (kind, (), None) for name, kind in texts.items()}
    expected |= {"pid": ("<i8", (), None), "origin_ticks": ("<i8", (), None)}
    expected |= {"slice_ps": ("<i8", (), "ps"), "spans": ("text", (2,), None)}
    assert form(entry) == expected
    assert entry["title"].asstr()[()] == "a run made by hand"
    assert entry["settings"].asstr()[()] == 'title = "a run made by hand"\n'
    assert entry["program_name"].attrs["version"] == "1.2"


def test_a_tally_field_by_field(entry: h5py.Group) -> None:
    number, scalar, ps = ("<f8", (11,), "1"), ("<i8", (), None), ("<i8", (), "ps")
    expected = {
        "lag": ("<f8", (11,), "ps"),
        "lag_edges": ("<f8", (12,), "ps"),
        "counts": ("<i8", (11,), None),
        "pair_time_ps": ("<i8", (11,), "ps"),
        "expected_pairs": ("<f8", (11,), None),
        **dict.fromkeys(("g2", "g2_errors", "g2_lower", "g2_upper"), number),
        **dict.fromkeys(("start_counts", "stop_counts"), scalar),
        **dict.fromkeys(("begin_ps", "end_ps", "live_time_ps"), ps),
        "live_time_s": ("<f8", (), "s"),
    }
    for name, span in (("hbt", "run"), ("hbt_10s", "10 s")):
        assert form(entry[name]) == expected
        assert attributes(entry[name]) == {
            "NX_class": "NXdata",
            "signal": "g2",
            "auxiliary_signals": ["counts"],
            "axes": ["lag"],
            "lag_indices": 0,
            "span": span,
            "title": f"hbt over {span}",
            "kind": "cross-correlation",
            "start": "arm_a",
            "stop": "arm_b",
        }
    assert entry["hbt/g2_lower"].attrs["level"] == entry["hbt/g2_upper"].attrs["level"] == 0.6827


def test_spans_share_their_axes_by_hard_links(entry: h5py.Group) -> None:
    for name in ("lag", "lag_edges"):
        assert entry["hbt"][name] == entry["hbt_10s"][name]
    assert entry["hbt"]["counts"] != entry["hbt_10s"]["counts"]


def test_numbers_stand_there_bit_for_bit(entry: h5py.Group) -> None:
    snapshot = make_snapshot()
    for view, name in zip(snapshot.spans, ("hbt", "hbt_10s"), strict=True):
        for key, values in view.tallies["hbt"].items():
            stored = entry[name][key][()]
            assert np.asarray(stored).dtype == values.dtype
            assert np.array_equal(stored, np.broadcast_to(values, np.shape(stored)))
    assert entry["channels/arm_a/counts"][0] == 2**53 + 1  # lost in a float64


def test_an_estimate_field_by_field(entry: h5py.Group) -> None:
    numbers = ("value", "lower", "upper", "raw_value", "raw_lower", "raw_upper")
    texts = ("interval", "method", "reason", "note", "spans")
    for name, unit in (("g2_zero", "1"), ("rate_a", "Hz")):
        group = entry["estimates"][name]
        assert form(group) == {
            **dict.fromkeys(numbers, ("<f8", (2,), unit)),
            "level": ("<f8", (2,), "1"),
            "counts": ("<i8", (2,), None),
            **dict.fromkeys(texts, ("text", (2,), None)),
            "unit": ("text", (), None),
        }
        assert group["unit"].asstr()[()] == unit
        assert tuple(group["spans"].asstr()[()]) == SPANS
        for position, found in enumerate(make_estimates()[name]):
            for key in (*numbers, "level", "counts"):
                assert np.array_equal(group[key][position], getattr(found, key), equal_nan=True)
            for key in texts[:-1]:
                assert group[key].asstr()[position] == getattr(found, key)
    assert attributes(entry["estimates"]) == {"NX_class": "NXcollection"}
    assert attributes(group) == {"NX_class": "NXcollection", "default": "history"}


def test_a_channel_field_by_field(entry: h5py.Group) -> None:
    times = dict.fromkeys(("begin_ps", "end_ps", "live_time_ps"), ("<i8", (2,), "ps"))
    for name in ("arm_a", "arm_b"):
        group = entry["channels"][name]
        assert attributes(group) == {"NX_class": "NXdetector"}
        assert form(group) == {
            **times,
            "counts": ("<i8", (2,), None),
            "rate_hz": ("<f8", (2,), "Hz"),
            "live_time_s": ("<f8", (2,), "s"),
            "spans": ("text", (2,), None),
        }
        assert "long_name" not in group["counts"].attrs  # detections; only tallies count pairs


def test_health_is_what_the_pipeline_said_with_units(entry: h5py.Group) -> None:
    units = {"gap_time_ps": "ps", "largest_disorder_ps": "ps", "last_tag_ps": "ps"}
    units |= {"lag_behind_s": "s", "gap_time_s": "s"}
    said = {**make_snapshot().health, "gap_time_s": 1.5}
    assert set(entry["health"]) == set(said)
    for name, value in said.items():
        dataset = entry["health"][name]
        assert dataset.shape == ()
        assert dataset.attrs.get("units") == units.get(name)
        if isinstance(value, str):
            assert dataset.asstr()[()] == value
        else:
            assert dataset.dtype.str == ("<i8" if isinstance(value, int) else "<f8")
            assert dataset[()] == value


def test_the_truth_of_a_simulation(tmp_path: Path, entry: h5py.Group) -> None:
    assert "truth" not in entry
    truth = {"g2_zero": 0.04, "seed": 1, "source": "emitter", "period_ps": 12_500, "arms": (1, 2)}
    (tmp_path / "second").mkdir()
    with h5py.File(write(tmp_path / "second", make_header(truth=truth)), "r") as file:
        group = file["run/truth"]
        assert group["g2_zero"][()] == 0.04
        assert group["source"].asstr()[()] == "emitter"
        assert group["arms"].asstr()[()] == "(1, 2)"
        assert group["period_ps"].attrs["units"] == "ps"


def test_the_history_of_an_estimate_has_columns_of_equal_length(entry: h5py.Group) -> None:
    group = entry["estimates/rate_a/history"]
    assert form(group) == {
        "time": ("<f8", (3,), "s"),
        **dict.fromkeys(("value", "lower", "upper", "value_errors"), ("<f8", (3,), "Hz")),
    }
    assert group["time"][()].tolist() == [1.0, 2.0, 3.0]
    assert group["value"][()].tolist() == [1000.0, 1001.0, 1002.0]
    assert group["value_errors"][()].tolist() == [10.0] * 3
    assert group.attrs["span"] == "10 s"


def valid_data(path: Path, name: str) -> tuple[str, tuple[int, ...], list[tuple[int, ...]]]:
    """Name and shape of the signal, shapes of the axes, as silx sees them."""
    with h5py.File(path, "r") as file:
        data: Any = NXdata(file[name], validate=True)
        assert data.is_valid, (name, data.issues)
        return data.signal_name, tuple(data.signal.shape), [axis.shape for axis in data.axes]


def test_every_nxdata_group_is_valid_for_silx(tmp_path: Path) -> None:
    path = write(tmp_path)
    for name in ("run/hbt", "run/hbt_10s"):
        assert valid_data(path, name) == ("g2", (11,), [(11,)])
    for name in ("g2_zero", "rate_a"):
        assert valid_data(path, f"run/estimates/{name}/history") == (name, (3,), [(3,)])
    profile = "run/estimates/g2_zero/profile"
    assert valid_data(path, profile) == ("area / mean of side peaks", (7,), [(7,)])
    found = []
    with h5py.File(path, "r") as file:
        file.visititems(
            lambda name, node: (
                found.append(name) if node.attrs.get("NX_class") == "NXdata" else None
            )
        )
    assert len(found) == 5  # none is left unchecked


HISTORY = "/run/estimates/g2_zero/history"
NO_TALLY = make_header(tallies={})


@pytest.mark.parametrize(
    ("header", "snapshot", "rows", "shown", "size"),
    [
        (make_header(), make_snapshot(), 3, "/run/hbt", 11),
        (NO_TALLY, make_snapshot(tallies=()), 3, HISTORY, 3),
        (NO_TALLY, make_snapshot(tallies=()), 1, HISTORY, 1),
        (make_header(), STARTING, 0, HISTORY, 0),
    ],
    ids=["tally", "no tally", "one slice", "starting"],
)
def test_two_viewers_find_the_default_plot(
    tmp_path: Path, header: RunHeader, snapshot: Snapshot, rows: int, shown: str, size: int
) -> None:
    path = write(tmp_path, header, snapshot, rows)
    with h5py.File(path, "r") as file:
        default: Any = get_default(file)
        assert default.is_valid, default.issues
        assert default.group.name == shown
        assert default.signal.shape == (size,)
    loaded = nxload(str(path)).plottable_data
    assert loaded.nxpath == shown
    assert loaded.nxsignal.shape == (size,)


def test_a_run_with_nothing_to_show_still_opens(tmp_path: Path) -> None:
    path = write(tmp_path, make_header(tallies={}, estimates={}), STARTING, 0)
    with h5py.File(path, "r") as file:
        assert get_default(file) is None
        assert "default" not in file["run"].attrs


def test_values_that_are_no_numbers_do_not_spoil_the_history(tmp_path: Path) -> None:
    header = make_header()
    recent = RecentValues(header.spans, header.slice_ps)
    recent.add(make_row(0))
    assert np.isnan(recent.columns("g2_zero")[1]).all()  # the 10 s span has no number
    assert make_estimates()["g2_zero"][1].value is nan
    valid_data(write(tmp_path, header), "run/estimates/g2_zero/history")


def test_the_same_input_gives_the_same_bytes(tmp_path: Path) -> None:
    first = write(tmp_path).read_bytes()
    assert write(tmp_path).read_bytes() == first
