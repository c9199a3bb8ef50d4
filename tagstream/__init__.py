"""Live, exact statistics of single-photon detector time tags.

    lag_ps, counts = tagstream.cross_correlation(start_ps, stop_ps, max_lag_ps=50_000, bin_ps=100)
    run = tagstream.open_run("runs/emitter-3")

Both are imported when first used, so that `import tagstream` costs nothing.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from tagstream._version import __version__

if TYPE_CHECKING:
    from tagstream.correlate import cross_correlation
    from tagstream.outputs.reader import open_run

__all__ = ["__version__", "cross_correlation", "open_run"]


def __getattr__(name: str) -> Any:
    if name == "cross_correlation":
        from tagstream.correlate import cross_correlation

        return cross_correlation
    if name == "open_run":
        from tagstream.outputs.reader import open_run

        return open_run
    raise AttributeError(f"module 'tagstream' has no attribute '{name}'")
