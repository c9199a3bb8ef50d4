"""A process that writes a run onto a disk that fills up. Arguments: the folder; who meets it first.

Prints the error that a person would see. Ends as an ordinary program does: whether the
interpreter gets through that is part of the test.
"""

from __future__ import annotations

import sys
from pathlib import Path

from tagstream.errors import ResultsError
from tagstream.outputs.folder import RunFolder
from tagstream.outputs.run_writer import RunWriter
from tests.fakes_outputs import FakeClock, make_header, make_row, make_snapshot


def fill(folder: Path) -> None:
    try:
        with (folder / "filler").open("wb", buffering=0) as filler:
            while True:
                filler.write(b"0" * 1000)
    except OSError:
        return


def main() -> None:
    folder, first = Path(sys.argv[1]), sys.argv[2]
    clock = FakeClock()
    writer = RunWriter(RunFolder.create(folder, "run"), make_header(), clock)
    writer.replace_snapshot(make_snapshot())
    writer.settle()
    try:
        for index in range(100_000):
            if index == 20:
                fill(folder)
            clock.now += 1
            writer.add_row(make_row(index))
            if first == "latest":
                writer.replace_snapshot(make_snapshot(index))
                writer.settle()
            elif first == "log":
                writer.event("warning", text="x" * 1000)
    except ResultsError as error:
        print(error)
    try:
        writer.close(make_snapshot(1))
    except ResultsError as error:
        print(error)


if __name__ == "__main__":
    main()
