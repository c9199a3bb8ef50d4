"""A file of described records that another program still writes."""

from __future__ import annotations

import os
import time
from collections.abc import Callable, Generator
from pathlib import Path
from typing import Any, BinaryIO

from tagstream.errors import InputError
from tagstream.feeds import Arrivals, ResumePoint
from tagstream.feeds.live_records import LiveRecordsFeed, Surroundings
from tagstream.settings.feeds import RecordsFeed as RecordsSettings


class GrowingFeed(LiveRecordsFeed):
    """Reads to the end of the file and waits there for more; it ends only when it is closed.

    wait: sleeps for some seconds. Raises InputError when the file cannot be opened, gets shorter
    or is replaced, after what was good before.
    """

    def __init__(
        self,
        settings: RecordsSettings,
        slice_ps: int,
        security: Any = None,
        resumed: ResumePoint | None = None,
        wait: Callable[[float], None] = time.sleep,
    ) -> None:
        super().__init__(settings, Surroundings(slice_ps, resumed))
        self._path, self._skip, self._wait = settings.path, settings.skip_bytes, wait

    def pieces(self) -> Generator[Arrivals]:
        """As `Feed.pieces`."""
        records = self._records
        try:
            with _opened(self._path) as file:
                file.seek(self._skip)
                while True:
                    if count := os.readv(file.fileno(), [records.room]):
                        self._received(count)
                        if records.due_s > 0:
                            continue
                    else:
                        self._check(file)
                        self._wait(self._patience_s)
                    yield from records.due_pieces()
        except InputError:
            yield from self._session_ended()
            raise

    def _check(self, file: BinaryIO) -> None:
        """Raise InputError unless the file is the same, and not shorter than what was read."""
        found, read = os.fstat(file.fileno()), file.seek(0, os.SEEK_CUR)
        if found.st_size < read and read > self._skip:
            raise InputError(
                f"{self._path}: has {found.st_size} bytes after {read} were read; with follow ="
                " true a file may only grow"
            )
        try:
            same = os.path.samestat(found, self._path.stat())
        except OSError:
            same = False
        if not same:
            raise InputError(
                f"{self._path}: was removed or replaced by another file while it was followed;"
                " right would be a run for each file"
            )


def _opened(path: Path) -> BinaryIO:
    try:
        return path.open("rb", buffering=0)
    except FileNotFoundError:
        raise InputError(f"{path}: no such file; a file to follow must be there") from None
    except OSError as error:
        raise InputError(f"{path}: cannot be read: {error.strerror}") from None
