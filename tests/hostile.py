"""Inputs that are broken, and what is right to say of each.

One table for the tests of single feeds and of the whole program. The rule for all: the tags
before the broken place are delivered, then one message says which file and place, what was
found and what would be right; nothing is ever only logged.
"""

from __future__ import annotations

import shutil
from collections.abc import Callable
from dataclasses import dataclass, field
from fractions import Fraction
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream.recording import RecordingWriter

COUNT = 10  # tags in the good version of each file
TIMES = np.arange(COUNT, dtype=np.int64) * 1000 + 5
INPUTS = np.arange(COUNT, dtype=np.uint8) % 3


@dataclass(frozen=True)
class HostileInput:
    """make: writes the file into a folder. feed: the [feed] table, `path` relative to it.

    words: each must be in the message. good_tags: delivered before it. exit_code: 3 for a broken
    input, 2 where the settings are wrong.
    """

    name: str
    make: Callable[[Path], None]
    feed: dict[str, Any] = field(repr=False)
    words: tuple[str, ...] = ()
    good_tags: int = 0
    exit_code: int = 3

    def table(self, folder: Path) -> dict[str, Any]:
        """The [feed] table with an absolute path, after the file was made."""
        self.make(folder)
        return self.feed | {"path": str(folder / self.feed["path"])}


def _nothing(folder: Path) -> None:
    """No file at all."""


def _bytes(name: str, content: bytes) -> Callable[[Path], None]:
    def make(folder: Path) -> None:
        (folder / name).write_bytes(content)

    return make


# Recordings -------------------------------------------------------------------------------


def _recording(change: Callable[[h5py.File], None]) -> Callable[[Path], None]:
    """A recording of three rows (4, 4 and 2 tags), then changed."""

    def make(folder: Path) -> None:
        with RecordingWriter(folder / "a.h5", tick=Fraction(1)) as recording:
            for first, last in [(0, 4), (4, 8), (8, 10)]:
                recording.add(TIMES[first:last], INPUTS[first:last], first * 1000, last * 1000)
        with h5py.File(folder / "a.h5", "r+") as file:
            change(file)

    return make


def _set(path: str, place: int, value: Any) -> Callable[[h5py.File], None]:
    def change(file: h5py.File) -> None:
        file[path][place] = value

    return change


def _replace(path: str, values: Any, units: str | None = "ps") -> Callable[[h5py.File], None]:
    def change(file: h5py.File) -> None:
        del file[path]
        if values is not None:
            dataset = file.create_dataset(path, data=values, dtype=np.asarray(values).dtype)
            if units is not None:
                dataset.attrs["units"] = units

    return change


def _text(path: str, text: str) -> Callable[[h5py.File], None]:
    def change(file: h5py.File) -> None:
        del file[path]
        file.create_dataset(path, data=text, dtype=h5py.string_dtype())

    return change


def _newer(file: h5py.File) -> None:
    file["run/coverage"].attrs["layout"] = 99


def _no_class(file: h5py.File) -> None:
    del file["run/events"].attrs["NX_class"]


def _no_rows(file: h5py.File) -> None:
    for name in list(file["run/coverage"]):
        _replace(f"run/coverage/{name}", np.zeros(0, np.int64), None)(file)


def _cut(folder: Path) -> None:
    _recording(lambda file: None)(folder)
    content = (folder / "a.h5").read_bytes()
    (folder / "a.h5").write_bytes(content[: len(content) // 2])


def _killed_writer(folder: Path) -> None:
    """What is left when a program that appends is killed: a copy of its open file."""
    with h5py.File(folder / "open.h5", "w", libver=("v110", "v110")) as file:
        file.create_dataset("x", (0,), maxshape=(None,), chunks=(8,), dtype="i8")
        file.swmr_mode = True
        file.flush()
        shutil.copy(folder / "open.h5", folder / "a.h5")


_OWN = {"kind": "recording", "path": "a.h5"}
_E = "run/events/"
_recordings = [
    HostileInput("no file", _nothing, _OWN, ("a.h5: no such file",)),
    HostileInput("a folder", lambda folder: (folder / "a.h5").mkdir(), _OWN, ("is a folder",)),
    HostileInput("no bytes", _bytes("a.h5", b""), _OWN, ("is empty (0 bytes)",)),
    HostileInput("text", _bytes("a.h5", b"tick,channel\n1,2\n"), _OWN, ("is no HDF5 file",)),
    HostileInput("cut off", _cut, _OWN, ("is cut off:", "bytes are there")),
    HostileInput("killed writer", _killed_writer, _OWN, ("was not closed",)),
    HostileInput(
        "no events", _recording(_no_class), _OWN, ("has no NXevent_data group", "`group`")
    ),
    HostileInput(
        "no such group",
        _recording(_newer),
        _OWN | {"group": "/run/evnts"},
        ("has no group /run/evnts", "/run/events"),
    ),
    HostileInput("newer layout", _recording(_newer), _OWN, ("layout 99", "reads layout 1")),
    HostileInput(
        "tick is no time",
        _recording(_text("run/native_tick", "fast")),
        _OWN,
        ("header is broken: native_tick is 'fast'", "12.5 ns"),
    ),
    HostileInput(
        "no inputs", _recording(_replace(_E + "event_id", None)), _OWN, ("has no dataset event_id",)
    ),
    HostileInput(
        "float inputs",
        _recording(_replace(_E + "event_id", np.zeros(COUNT), None)),
        _OWN,
        ("event_id: holds float64; right would be whole numbers",),
    ),
    HostileInput(
        "text offsets",
        _recording(_replace(_E + "event_time_offset", np.array([b"x"] * COUNT))),
        _OWN,
        ("event_time_offset: holds |S1; right would be numbers",),
    ),
    HostileInput(
        "two dimensions",
        _recording(_replace(_E + "event_id", np.zeros((COUNT, 2), np.uint8), None)),
        _OWN,
        ("event_id: has shape (10, 2); right would be one dimension",),
    ),
    HostileInput(
        "no unit",
        _recording(_replace(_E + "event_time_offset", np.zeros(COUNT, np.uint32), None)),
        _OWN,
        ("event_time_offset: has no units",),
    ),
    HostileInput(
        "a length for a time",
        _recording(_replace(_E + "event_time_zero", np.zeros(3, np.int64), "mm")),
        _OWN,
        ("event_time_zero: units are 'mm'", "ns"),
    ),
    HostileInput(
        "fewer inputs than times",
        _recording(_replace(_E + "event_id", INPUTS[:7], None)),
        _OWN,
        ("event_id has 7 and event_time_offset 10 values", "equal lengths"),
        7,
    ),
    HostileInput(
        "fewer times than inputs",
        _recording(_replace(_E + "event_time_offset", np.zeros(9, np.uint32))),
        _OWN,
        ("event_id has 10 and event_time_offset 9 values", "equal lengths"),
        9,
    ),
    HostileInput(
        "groups go back",
        _recording(_set(_E + "event_index", 2, 3)),
        _OWN,
        ("event_index[2] is 3; right would be 4 to 10",),
        4,
    ),
    HostileInput(
        "groups go too far",
        _recording(_set(_E + "event_index", 1, 11)),
        _OWN,
        ("event_index[1] is 11; right would be 0 to 10",),
    ),
    HostileInput(
        "tags before the first group",
        _recording(_set(_E + "event_index", 0, 1)),
        _OWN,
        ("event_index[0] is 1; right would be 0",),
    ),
    HostileInput(
        "fewer zeros than groups",
        _recording(_replace(_E + "event_time_zero", np.zeros(2, np.int64))),
        _OWN,
        ("tag 8 of 10 belongs to no group", "event_time_zero has 2 and event_index 3"),
        8,
    ),
    HostileInput(
        "fewer groups than zeros",
        _recording(_replace(_E + "event_index", np.array([0, 4]), None)),
        _OWN,
        ("tag 4 of 10 belongs to no group", "event_time_zero has 3 and event_index 2"),
        4,
    ),
    HostileInput(
        "groups without zeros",
        _recording(_replace(_E + "event_time_zero", None)),
        _OWN,
        ("has event_index but no event_time_zero",),
    ),
    HostileInput(
        "zeros without groups",
        _recording(_replace(_E + "event_index", None)),
        _OWN,
        ("has no event_index, and 3 event_time_zero for 10 tags",),
    ),
    HostileInput(
        "a zero that is no number",
        _recording(_replace(_E + "event_time_zero", np.array([0, 0.5, np.nan]))),
        _OWN,
        ("event_time_zero[2] is no time that fits",),
        8,
    ),
    HostileInput(
        "an offset that is no number",
        _recording(_replace(_E + "event_time_offset", np.array([0, 1.5, np.inf] + [0] * 7))),
        _OWN,
        ("event_time_offset[2] is inf; right would be a time that fits",),
        2,
    ),
    HostileInput(
        "an input past 65535",
        _recording(_replace(_E + "event_id", np.array([1, 1, 1, 1, 1, 70000, 1, 1, 1, 1]), None)),
        _OWN,
        ("event_id[5] is 70000; right would be 0 to 65535",),
        5,
    ),
    HostileInput(
        "rows go back",
        _recording(_set("run/coverage/first_event", 2, 3)),
        _OWN,
        ("coverage/first_event[2] is 3; right would be 4 to 10",),
        4,
    ),
    HostileInput(
        "tags before the first row",
        _recording(_set("run/coverage/first_event", 0, 1)),
        _OWN,
        ("coverage/first_event[0] is 1; right would be 0",),
    ),
    HostileInput(
        "an interval that ends before it begins",
        _recording(_set("run/coverage/end", 1, 0)),
        _OWN,
        ("row 1 begins at 4000 ps and ends at 0 ps",),
        4,
    ),
    HostileInput(
        "tags without rows",
        _recording(_no_rows),
        _OWN,
        ("coverage: has no rows",),
    ),
    HostileInput(
        "columns of rows of unequal length",
        _recording(_replace("run/coverage/flags", np.full(2, 9, np.uint8), None)),
        _OWN,
        ("columns of [3, 3, 3, 2] rows",),
        8,
    ),
    HostileInput(
        "rows without an end",
        _recording(_replace("run/coverage/first_event", np.array([0, 4]), None)),
        _OWN,
        ("columns of [3, 3, 2, 3] rows",),
        4,
    ),
    HostileInput(
        "truth is no table",
        _recording(lambda file: file.create_dataset("run/truth/data", data=b"[1, 2]", dtype="S6")),
        _OWN,
        ("header is broken: truth is no table",),
    ),
    HostileInput(
        "no run",
        _recording(_replace("run/entry_identifier_uuid", None)),
        _OWN,
        ("header is broken", "entry_identifier_uuid is missing"),
    ),
    HostileInput(
        "no column of rows",
        _recording(_replace("run/coverage/end", None)),
        _OWN,
        ("coverage: has no dataset end",),
    ),
]

# Columns ----------------------------------------------------------------------------------

_CSV = {
    "kind": "columns",
    "path": "a.csv",
    "time_column": "tick",
    "channel_column": "channel",
    "tick": "1 ps",
}
_GOOD_LINES = b"tick,channel\n1000,1\n2000,2\n"


def _csv(name: str, line: bytes, words: tuple[str, ...] = ()) -> HostileInput:
    """Two good rows, the broken line, and one after it that must not be read."""
    shown = line.decode("utf-8", "replace")
    words = words or (f"a.csv, line 4: found '{shown}'", "2 columns", "0 to 65535")
    content = _GOOD_LINES + line + b"\n4000,1\n"
    return HostileInput(f"csv: {name}", _bytes("a.csv", content), _CSV, words, 2)


_csvs = [
    HostileInput("csv: no file", _nothing, _CSV, ("a.csv: no such file",)),
    HostileInput("csv: no bytes", _bytes("a.csv", b""), _CSV, ("is empty (0 bytes)",)),
    HostileInput(
        "csv: header only", _bytes("a.csv", b"tick,channel\n"), _CSV, ("a.csv: holds no tags",)
    ),
    HostileInput(
        "csv: other columns",
        _bytes("a.csv", b"time; detector\n1;2\n"),
        _CSV,
        ("does not name tick and channel", "found time; detector"),
    ),
    HostileInput(
        "csv: a column twice",
        _bytes("a.csv", b"tick,channel,tick\n1,2,3\n"),
        _CSV,
        ("does not name tick and channel once each; found tick,channel,tick",),
    ),
    HostileInput(
        "csv: UTF-16", _bytes("a.csv", "tick,channel\n1,2\n".encode("utf-16")), _CSV, ("no UTF-8",)
    ),
    HostileInput("csv: binary", _bytes("a.csv", bytes(range(256))), _CSV, ("does not name tick",)),
    HostileInput(
        "csv: carriage returns alone",
        _bytes("a.csv", b"tick,channel\r1,2\r"),
        _CSV,
        ("does not name tick and channel",),
    ),
    HostileInput("csv: Latin-1", _bytes("a.csv", b"Z\xe4hler,x\n"), _CSV, ("byte 1 is no UTF-8",)),
    HostileInput(
        "csv: endless first line", _bytes("a.csv", b"x" * (1 << 20)), _CSV, ("the first line",)
    ),
    HostileInput(
        "csv: endless line",
        _bytes("a.csv", _GOOD_LINES + b"3" * (1 << 23)),
        _CSV,
        ("line 4: is longer than 65536 bytes",),
        2,
    ),
    HostileInput(
        "csv: cut off in a line",
        _bytes("a.csv", _GOOD_LINES + b"3000"),
        _CSV,
        ("line 4: found '3000'",),
        2,
    ),
    _csv("text", b"3000,arm_a"),
    _csv("one column", b"3000"),
    _csv("three columns", b"3000,1,7"),
    _csv("nothing in a column", b"3000,"),
    _csv("a sign alone", b"-,1"),
    _csv("a float", b"3000.0,1"),
    _csv("an exponent", b"3e3,1"),
    _csv("past 64 bits", b"9223372036854775808,1"),
    _csv("far past 64 bits", b"99999999999999999999999,1"),
    _csv("a negative input", b"3000,-1"),
    _csv("an input past 65535", b"3000,65536"),
    _csv("zero bytes", b"\0\0\0\0", ("a.csv, line 4: found '\\x00",)),
    _csv("the header again", b"tick,channel"),
    HostileInput(
        "columns: unknown ending",
        _bytes("a.dat", b"1,2"),
        _CSV | {"path": "a.dat"},
        ("a.dat", ".csv", ".h5", "folder"),
        exit_code=2,
    ),
    HostileInput(
        "columns: one column for both",
        _bytes("a.csv", _GOOD_LINES),
        _CSV | {"channel_column": "tick"},
        ("channel_column: tick is the time_column too",),
        exit_code=2,
    ),
]

_NPY = _CSV | {"path": "pair", "time_column": "t.npy", "channel_column": "c.npy"}


def _npy(
    times: NDArray[Any] | bytes | None, inputs: NDArray[Any] = INPUTS
) -> Callable[[Path], None]:
    def make(folder: Path) -> None:
        pair = folder / "pair"
        pair.mkdir()
        np.save(pair / "c.npy", inputs)
        if isinstance(times, bytes):
            (pair / "t.npy").write_bytes(times)
        elif times is not None:
            np.save(pair / "t.npy", times)

    return make


def _npy_cut(folder: Path) -> None:
    _npy(TIMES)(folder)
    content = (folder / "pair" / "t.npy").read_bytes()
    (folder / "pair" / "t.npy").write_bytes(content[:-28])  # 3.5 values


_npys = [
    HostileInput("npy: one missing", _npy(None), _NPY, ("t.npy: no such file",)),
    HostileInput("npy: text", _npy(b"not an array"), _NPY, ("t.npy: is no .npy file",)),
    HostileInput("npy: no bytes", _npy(b""), _NPY, ("t.npy: is empty",)),
    HostileInput(
        "npy: floats", _npy(TIMES * 1.0), _NPY, ("t.npy: holds float64", "whole numbers", "`tick`")
    ),
    HostileInput("npy: objects", _npy(np.array([1, None])), _NPY, ("t.npy: holds object",)),
    HostileInput("npy: a table", _npy(TIMES.reshape(5, 2)), _NPY, ("t.npy: has shape (5, 2)",)),
    HostileInput("npy: no tags", _npy(TIMES[:0], INPUTS[:0]), _NPY, ("holds no tags",)),
    HostileInput(
        "npy: unequal", _npy(TIMES, INPUTS[:8]), _NPY, ("t.npy has 10", "c.npy 8 values"), 8
    ),
    HostileInput("npy: cut off", _npy_cut, _NPY, ("t.npy: is cut off: 6 of 10 values",), 6),
    HostileInput(
        "npy: past int64",
        _npy(np.where(np.arange(COUNT) == 4, 2**63, TIMES.astype(np.uint64))),
        _NPY,
        ("t.npy: value 4 is 9223372036854775808; right would be below 2**63",),
        4,
    ),
    HostileInput(
        "npy: the first input is bad",
        _npy(TIMES, np.full(COUNT, -1)),
        _NPY,
        ("c.npy: value 0 is -1; right would be 0 to 65535",),
    ),
    HostileInput(
        "npy: version 9",
        _npy(b"\x93NUMPY\x09\x00" + b" " * 100),
        _NPY,
        ("t.npy: is no .npy file",),
    ),
    HostileInput(
        "npy: negative input",
        _npy(TIMES, np.where(np.arange(COUNT) == 6, -2, INPUTS.astype(np.int32))),
        _NPY,
        ("c.npy: value 6 is -2; right would be 0 to 65535",),
        6,
    ),
]

_HDF5 = _CSV | {"path": "a.h5", "time_column": "/raw/ticks", "channel_column": "/raw/inputs"}


def _hdf5(times: Any, inputs: Any = INPUTS) -> Callable[[Path], None]:
    def make(folder: Path) -> None:
        with h5py.File(folder / "a.h5", "w") as file:
            raw = file.create_group("raw")
            raw.create_dataset("inputs", data=inputs, dtype=np.asarray(inputs).dtype)
            if isinstance(times, h5py.ExternalLink):
                raw["ticks"] = times
            elif times is not None:
                raw.create_dataset("ticks", data=times, dtype=np.asarray(times).dtype)

    return make


_hdf5s = [
    HostileInput("hdf5: text", _bytes("a.h5", b"tick,channel"), _HDF5, ("is no HDF5 file",)),
    HostileInput(
        "hdf5: no dataset", _hdf5(None), _HDF5, ("has no dataset /raw/ticks; found /raw/inputs",)
    ),
    HostileInput(
        "hdf5: a group",
        _hdf5(TIMES),
        _HDF5 | {"time_column": "raw"},
        ("has a group, no dataset, raw; found /raw/inputs, /raw/ticks",),
    ),
    HostileInput(
        "hdf5: a link to nowhere",
        _hdf5(h5py.ExternalLink("gone.h5", "/x")),
        _HDF5,
        ("has no dataset /raw/ticks; found /raw/inputs",),
    ),
    HostileInput(
        "hdf5: floats", _hdf5(TIMES / 1e12), _HDF5, ("/raw/ticks holds float64", "whole numbers")
    ),
    HostileInput("hdf5: one number", _hdf5(np.int64(5)), _HDF5, ("/raw/ticks has shape ()",)),
    HostileInput(
        "hdf5: unequal", _hdf5(TIMES[:7]), _HDF5, ("/raw/ticks has 7 and", "inputs 10 values"), 7
    ),
    HostileInput(
        "hdf5: an input past 65535",
        _hdf5(TIMES, INPUTS + np.uint32(65535)),
        _HDF5,
        ("/raw/inputs: value 1 is 65536",),
        1,
    ),
]

# Records ----------------------------------------------------------------------------------

_RECORDS = {
    "kind": "records",
    "path": "a.bin",
    "record_bytes": 8,
    "tick": "1 ps",
    "time_bits": [0, 48],
    "channel_bits": [48, 8],
    "marker": [{"where": [63, 1], "equals": 1, "means": "rollover", "count": [0, 10]}],
}
_GOOD_RECORDS = (TIMES | INPUTS.astype(np.int64) << 48).tobytes()

_records = [
    HostileInput("records: no file", _nothing, _RECORDS, ("a.bin: no such file",)),
    HostileInput("records: no bytes", _bytes("a.bin", b""), _RECORDS, ("is empty (0 bytes)",)),
    HostileInput(
        "records: cut off",
        _bytes("a.bin", _GOOD_RECORDS[:-5]),
        _RECORDS,
        ("the last 3 bytes are no whole record of 8 bytes",),
        9,
    ),
    HostileInput(
        "records: less than one",
        _bytes("a.bin", b"abc"),
        _RECORDS,
        ("the last 3 bytes are no whole record",),
    ),
    HostileInput(
        "records: shorter than its header",
        _bytes("a.bin", _GOOD_RECORDS),
        _RECORDS | {"skip_bytes": 81},
        ("has 80 bytes, fewer than skip_bytes = 81",),
    ),
    HostileInput(
        "records: only a header",
        _bytes("a.bin", _GOOD_RECORDS),
        _RECORDS | {"skip_bytes": 80},
        ("a.bin: holds no tags",),
    ),
    HostileInput(
        "records: only rollovers",
        _bytes("a.bin", np.full(4, -(2**63), np.int64).tobytes()),
        _RECORDS,
        ("a.bin: holds no tags",),
    ),
    HostileInput(
        "records: a marker that contradicts itself",
        _bytes("a.bin", _GOOD_RECORDS),
        _RECORDS | {"marker": [{"where": [[63, 1], [62, 2]], "equals": [1, 0], "means": "skip"}]},
        ("[[feed.marker]] 1", "contradict"),
        exit_code=2,
    ),
]

HOSTILE = [*_recordings, *_csvs, *_npys, *_hdf5s, *_records]
