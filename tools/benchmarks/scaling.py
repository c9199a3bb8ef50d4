"""Cost against work: tags over four decades, pairs over four decades."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
from kernels import ours
from light import poisson
from measure import seconds, table

TAGS = [10**4, 10**5, 10**6, 10**7, 10**8]
LAGS_NS = [10, 100, 1_000, 10_000, 100_000]


def run(folder: Path, picture: Path) -> dict[str, Any]:
    """Print seconds against tags and pairs; draw both on logarithmic axes."""
    by_tags, by_pairs = [], []
    for count in TAGS:
        tags = poisson([1e6] * 2, count)
        took = seconds(lambda t=tags: ours(t, [(0, 1)], 2, 500, 100))
        by_tags.append((count, took))
    for lag in LAGS_NS:
        tags = poisson([5e6] * 2, 200_000)
        # The same number of bins for all, so that pairs alone grow.
        bin_ps = lag * 1_000 // 100
        counts = ours(tags, [(0, 1)], 2, 100, bin_ps)
        took = seconds(lambda t=tags, w=bin_ps: ours(t, [(0, 1)], 2, 100, w))
        by_pairs.append((int(counts.sum()), took))
    rows = [[f"{n:.0e}", f"{t * 1e3:.3f}", f"{t / n * 1e9:.2f}"] for n, t in by_tags]
    table("cost against tags (2 x 1 M/s, +-50 ns)", ["tags", "ms", "ns a tag"], rows)
    rows = [[f"{n:.1e}", f"{t * 1e3:.2f}", f"{t / n * 1e9:.2f}"] for n, t in by_pairs]
    table("cost against pairs (2 x 5 M/s, 2 x 10^5 tags)", ["pairs", "ms", "ns a pair"], rows)
    draw(by_tags, by_pairs, picture)
    return {"seconds by tags": by_tags, "seconds by pairs": by_pairs}


def draw(
    by_tags: list[tuple[int, float]], by_pairs: list[tuple[int, float]], picture: Path
) -> None:
    """Seconds against tags and against pairs; a dotted line is proportional."""
    import matplotlib as mpl
    from matplotlib.figure import Figure

    from tagstream.plotting import BAR, INK, STYLE

    with mpl.rc_context(STYLE):
        figure = Figure()
        for axes, points, what in zip(
            figure.subplots(1, 2), (by_tags, by_pairs), ("tags", "pairs"), strict=True
        ):
            x, y = np.array(points).T
            axes.loglog(x, x * y[-1] / x[-1], ":", color=BAR)
            axes.loglog(x, y, "o", color=INK, markerfacecolor="white")
            axes.set_xlabel(what)
            axes.set_ylabel("seconds")
        figure.savefig(picture)
    print(f"\nscaling drawn in {picture}")
