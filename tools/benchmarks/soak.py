"""`tools/soak`: the daemon under steady load for twenty minutes, or as long as one likes."""

from __future__ import annotations

import argparse
import sys
import tempfile
from pathlib import Path

from light import record, steady_pieces

sys.path.append(str(Path(__file__).parents[2]))
from tests.flow.soak import soak

PART_S = 10  # of light that is played again and again


def main() -> None:
    """Make light, play it, print what was found."""
    parser = argparse.ArgumentParser(prog="tools/soak", description=__doc__)
    parser.add_argument("--minutes", type=float, default=20)
    parser.add_argument("--rate", type=float, default=20e6, help="tags per second")
    parser.add_argument("--recording", action="store_true", help="record raw tags meanwhile")
    parser.add_argument("--folder", type=Path, help="where files are kept meanwhile")
    chosen = parser.parse_args()
    more = '[recording]\nsegment = "1 GB"\nkeep = "3 GB"\n' if chosen.recording else ""
    with tempfile.TemporaryDirectory(dir=chosen.folder) as name:
        folder = Path(name)
        record(folder / "steady.h5", steady_pieces(int(chosen.rate), PART_S))
        repeat = max(round(chosen.minutes * 60 / PART_S), 1)
        for line in soak(folder / "daemon", folder / "steady.h5", repeat, more).lines():
            print(line)


if __name__ == "__main__":
    main()
