"""Reading a run, live or finished, without disturbing it.

Every access reads anew, so a live run shows its current numbers. latest.h5 is opened without a
lock and as a whole file; the history, while it grows, in SWMR mode.
"""

from __future__ import annotations

import io
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any, Generic, TypeVar

import h5py
import numpy as np
from numpy.typing import NDArray

from tagstream.errors import ResultsError
from tagstream.estimates import Estimate
from tagstream.marks import Value
from tagstream.outputs import layout as at
from tagstream.outputs.folder import is_held
from tagstream.recording.layout import MARK_TABLE, Mark
from tagstream.recording.marks import read_marks
from tagstream.units import PS_PER_S

T = TypeVar("T")


class Named(Mapping[str, T], Generic[T]):
    """A mapping whose KeyError names what there is."""

    def __init__(self, what: str, found: Mapping[str, T]) -> None:
        self._what, self._found = what, dict(found)

    def __getitem__(self, name: str) -> T:
        if name not in self._found:
            known = ", ".join(self._found) or "none"
            raise KeyError(f"no {self._what} {name!r}; there are: {known}")
        return self._found[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self._found)

    def __len__(self) -> int:
        return len(self._found)

    def __repr__(self) -> str:
        return f"<{self._what}: {', '.join(self._found) or 'none'}>"


def open_run(path: str | Path) -> Run:
    """The run in a folder; `path` may also be the link to the newest, or a latest.h5.

    Raises ResultsError when there is no run.
    """
    folder = Path(path)
    if folder.name == "latest.h5":
        folder = folder.parent
    if not (folder / "latest.h5").is_file():
        raise ResultsError(f"{path}: no run: a folder that holds a latest.h5 would be right")
    return Run(folder.resolve())


class Run:
    """A run folder. Attributes read the files at the moment they are used.

    latest: the content of latest.h5 that is to be shown, absent what is there at that moment.
    """

    def __init__(self, path: Path, latest: bytes | None = None) -> None:
        self.path, self._content = path, latest

    def still(self) -> Run:
        """The same run as it is now: all that latest.h5 says is of one moment.

        Raises ResultsError when it cannot be read.
        """
        try:
            return Run(self.path, (self.path / "latest.h5").read_bytes())
        except OSError as error:
            raise _not_results(self.path / "latest.h5", error) from error

    def __repr__(self) -> str:
        return f"Run({str(self.path)!r})"

    @property
    def estimates(self) -> Named[Named[Estimate]]:
        """name -> span -> Estimate: value, lower, upper, level, method, counts and so on."""
        with self._latest() as entry:
            group = entry[at.ESTIMATES]
            return Named("estimate", {name: _estimates(group[name]) for name in group})

    @property
    def tallies(self) -> Named[Named[dict[str, NDArray[Any]]]]:
        """name -> span -> arrays by name, as in latest.h5."""
        found: dict[str, dict[str, dict[str, NDArray[Any]]]] = {}
        with self._latest() as entry:
            for name, group in entry.items():
                if isinstance(group, h5py.Group) and "span" in group.attrs:
                    span = group.attrs["span"]
                    tally = name if span == "run" else name.removesuffix(f"_{at.span_suffix(span)}")
                    arrays = _arrays(group)
                    found.setdefault(tally, {})[span] = arrays
        return Named("tally", {name: Named("span", spans) for name, spans in found.items()})

    def split(self, tally: str) -> dict[Value, dict[str, NDArray[Any]]]:
        """value -> arrays over the whole run, of a tally that marks split.

        A value is the number or text of a mark, "unmarked" before the first one, "other" for all
        beyond the limit. Empty when the tally is not split. Raises KeyError for an unknown tally.
        """
        with self._latest() as entry:
            known = Named("tally", dict.fromkeys(_tally_names(entry)))
        known[tally]  # raises with the names that there are
        with self._latest() as entry:
            return dict(_parts(entry[tally]))

    @property
    def split_keys(self) -> dict[str, str]:
        """name -> key of marks, of the tallies that are split."""
        with self._latest() as entry:
            keys = {name: entry[name].attrs.get("split_by") for name in _tally_names(entry)}
            return {name: key for name, key in keys.items() if key is not None}

    @property
    def marks(self) -> list[Mark]:
        """The newest marks in the order in which they were set; times are stream time."""
        with self._latest() as entry:
            return read_marks(entry[MARK_TABLE]) if MARK_TABLE in entry else []

    @property
    def channels(self) -> Named[Named[dict[str, Any]]]:
        """name -> span -> counts, rate_hz, live_time_s, live_time_ps."""
        with self._latest() as entry:
            group = entry[at.CHANNELS]
            return Named("channel", {name: _per_span(group[name]) for name in group})

    @property
    def health(self) -> dict[str, Any]:
        """Counters and state, by name."""
        with self._latest() as entry:
            return _scalars(entry[at.HEALTH])

    @property
    def truth(self) -> dict[str, Any]:
        """What a simulation knows of its light; empty for other runs."""
        with self._latest() as entry:
            return _scalars(entry[at.TRUTH]) if at.TRUTH in entry else {}

    @property
    def about(self) -> dict[str, Any]:
        """title, settings, start_time, updated_utc, end_time, run_uuid, tick and so on."""
        with self._latest() as entry:
            return _scalars(entry)

    @property
    def is_live(self) -> bool:
        """Whether a process writes the run now."""
        return is_held(self.path)

    def profile(self, estimate: str) -> dict[str, NDArray[Any]]:
        """What an estimate over the run was made from; empty if it keeps nothing.

        Raises KeyError for an unknown estimate.
        """
        self.estimates[estimate]  # raises with the names that there are
        with self._latest() as entry:
            group = entry[at.ESTIMATES][estimate]
            if "profile" not in group:
                return {}
            return {name: dataset[()] for name, dataset in group["profile"].items()}

    def history(self, estimate: str, span: str = "run") -> dict[str, NDArray[Any]]:
        """Columns over the whole run, one entry per slice.

        begin_ps, end_ps (int64), time_s (end of the slice, float64), live_time_ps (int64), utc
        (Unix seconds of writing), value, lower, upper (float64; nan where there is no number).
        Raises KeyError for an unknown estimate or span.
        """
        self._check_names(estimate, span)
        wanted = {c: at.number_column(estimate, span, c) for c in at.HISTORY_COLUMNS}
        parts = [_history_part(file, wanted) for file in sorted(self.path.glob("history-*.h5"))]
        if not parts:
            raise ResultsError(f"{self.path}: no history-*.h5 in this run")
        joined = {key: np.concatenate([part[key] for part in parts]) for key in parts[0]}
        return {**joined, "time_s": joined["end_ps"] / PS_PER_S}

    def _check_names(self, estimate: str, span: str) -> None:
        """Before the first slice has ended, too, when no estimate has a value yet."""
        with self._latest() as entry:
            estimates = Named("estimate", dict.fromkeys(entry[at.ESTIMATES]))
            spans = Named("span", dict.fromkeys(entry["spans"].asstr()[()]))
        estimates[estimate], spans[span]

    def _latest(self) -> _Entry:
        return _Entry(self.path / "latest.h5", self._content)


class _Entry:
    """The entry of latest.h5, open for the time of a `with`."""

    def __init__(self, path: Path, content: bytes | None) -> None:
        self._path, self._content = path, content

    def __enter__(self) -> h5py.Group:
        try:
            source = self._path if self._content is None else io.BytesIO(self._content)
            self._file = h5py.File(source, "r", locking=False)
        except OSError as error:
            raise _not_results(self._path, error) from error
        if at.ENTRY not in self._file:
            self._file.close()
            raise _not_results(self._path, KeyError(f"no group {at.ENTRY}"))
        return self._file[at.ENTRY]

    def __exit__(self, kind: object, error: BaseException | None, _: object) -> None:
        self._file.close()
        if isinstance(error, KeyError | OSError | RuntimeError):
            raise _not_results(self._path, error) from error


def _not_results(path: Path, error: BaseException) -> ResultsError:
    text = error.args[0] if error.args else error
    return ResultsError(
        f"{path}: not readable as results of a run: {text}; a file that tagstream wrote would be"
        " right"
    )


def _tally_names(entry: h5py.Group) -> list[str]:
    return [name for name, node in entry.items() if node.attrs.get("span") == "run"]


def _arrays(group: h5py.Group) -> dict[str, NDArray[Any]]:
    return {name: node[()] for name, node in group.items() if isinstance(node, h5py.Dataset)}


def _parts(group: h5py.Group) -> Iterator[tuple[Value, dict[str, NDArray[Any]]]]:
    """(value, arrays) for each value of a tally that is split, in their order."""
    key = group.attrs.get("split_by")
    parts = group.get(at.split_group(key), {}) if key is not None else {}
    numbers = sorted(int(name) for name in parts if name.isdecimal())
    for number in numbers:
        part = parts[str(number)]
        value = part.attrs["value"]
        yield value if isinstance(value, str) else float(value), _arrays(part)


def _estimates(group: h5py.Group) -> Named[Estimate]:
    columns: dict[str, list[Any]] = {
        **{key: group[key][()].tolist() for key in (*at.ESTIMATE_NUMBERS, "counts")},
        **{key: group[key].asstr()[()].tolist() for key in at.ESTIMATE_TEXTS},
    }
    unit = group["unit"].asstr()[()]
    spans = group["spans"].asstr()[()]
    return Named(
        "span",
        {
            span: Estimate(unit=unit, **{key: values[i] for key, values in columns.items()})
            for i, span in enumerate(spans)
        },
    )


def _per_span(group: h5py.Group) -> Named[dict[str, Any]]:
    spans = group["spans"].asstr()[()]
    columns = {key: group[key][()] for key in group if key != "spans"}
    return Named(
        "span",
        {
            span: {key: values[i].item() for key, values in columns.items()}
            for i, span in enumerate(spans)
        },
    )


def _scalars(group: h5py.Group) -> dict[str, Any]:
    found: dict[str, Any] = {}
    for name, node in group.items():
        if isinstance(node, h5py.Dataset) and node.shape == ():
            text = h5py.check_string_dtype(node.dtype) is not None
            found[name] = node.asstr()[()] if text else node[()].item()
    return found


def _history_part(path: Path, wanted: Mapping[str, str]) -> dict[str, NDArray[Any]]:
    try:
        file = open_history(path)
    except OSError as error:
        raise _not_results(path, error) from error
    with file:
        integers, numbers = (file[at.ENTRY][n] for n in (at.HISTORY_INTEGERS, at.HISTORY_NUMBERS))
        rows = min(integers.shape[0], numbers.shape[0])
        columns = {name: i for i, name in enumerate(_names(integers))}
        found = {
            key: integers[:rows, columns[key]] for key in ("begin_ps", "end_ps", "live_time_ps")
        }
        columns = {name: i for i, name in enumerate(_names(numbers))}
        for key, name in {"utc": "utc", **wanted}.items():
            absent = np.full(rows, np.nan)
            found[key] = numbers[:rows, columns[name]] if name in columns else absent
        return found


def open_history(path: Path) -> h5py.File:
    """A history that grows, or was left so by a crash, in SWMR mode; a closed one as it is.

    In SWMR mode HDF5 waits for ever for what a damaged file lacks, so damage is looked for
    first. Bytes of the superblock: HDF5 File Format Specification 3.0, section II.A, version 3.
    """
    with path.open("rb") as plain:
        head, size = plain.read(36), plain.seek(0, 2)
    growing = len(head) == 36 and head[11] != 0
    if growing and int.from_bytes(head[28:36], "little") > size:
        raise OSError("its end is missing")
    return h5py.File(path, "r", swmr=growing, locking=False)


def _names(table: h5py.Dataset) -> list[str]:
    return [name.decode() for name in table.attrs["columns"]]
