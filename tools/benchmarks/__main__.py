"""`tools/bench`: all measurements of this version on this machine, in one run."""

from __future__ import annotations

import argparse
import json
import os
import platform
import tempfile
from pathlib import Path
from typing import Any

import kernels
import live
import program
import scaling

from tagstream import __version__

PARTS = ("kernels", "program", "memory", "scaling", "start", "live")


def main() -> None:
    """Run the chosen parts; write the figures as JSON."""
    parser = argparse.ArgumentParser(prog="tools/bench", description=__doc__)
    parser.add_argument("parts", nargs="*", help=f"of {', '.join(PARTS)}; absent: all of them")
    parser.add_argument("--long", action="store_true", help="also 10^9 tags: 5 GB on disk")
    parser.add_argument("--folder", type=Path, help="where recordings are kept meanwhile")
    parser.add_argument("--output", type=Path, default=Path("bench-results"))
    chosen = parser.parse_args()
    if unknown := set(chosen.parts) - set(PARTS):
        parser.error(f"{', '.join(sorted(unknown))}: right would be some of {', '.join(PARTS)}")
    chosen.parts = chosen.parts or PARTS
    chosen.output.mkdir(parents=True, exist_ok=True)
    print(f"tagstream {__version__}, Python {platform.python_version()}, {os.cpu_count()} cores")
    with tempfile.TemporaryDirectory(dir=chosen.folder) as name:
        folder = Path(name)
        figures: dict[str, Any] = {}
        if "kernels" in chosen.parts:
            figures["kernels"] = kernels.run(folder)
        if "program" in chosen.parts:
            figures["program"] = program.run(folder)
        if "memory" in chosen.parts:
            counts = [10**7, 10**8, *([10**9] if chosen.long else [])]
            figures["memory"] = program.memory(folder, counts)
        if "scaling" in chosen.parts:
            figures["scaling"] = scaling.run(folder, chosen.output / "scaling.png")
        if "start" in chosen.parts:
            figures["start"] = program.start(folder)
        if "live" in chosen.parts:
            figures["live"] = live.run(folder)
    (chosen.output / "figures.json").write_text(json.dumps(figures, indent=2))
    print(f"figures in {chosen.output / 'figures.json'}")


if __name__ == "__main__":
    main()
