"""A process that writes a run as fast as it can, to be read, held and killed by tests.

Arguments: the results folder. Says "ready" when the run stands.
"""

from __future__ import annotations

import itertools
import sys
from pathlib import Path

from tagstream.outputs.folder import RunFolder
from tagstream.outputs.run_writer import RunWriter
from tests.fakes_outputs import make_header, make_row, make_snapshot


def main() -> None:
    writer = RunWriter(RunFolder.create(Path(sys.argv[1]), "run"), make_header())
    print("ready", flush=True)
    for index in itertools.count():
        writer.add_row(make_row(index))
        writer.replace_snapshot(make_snapshot(index))
        writer.settle()


if __name__ == "__main__":
    main()
