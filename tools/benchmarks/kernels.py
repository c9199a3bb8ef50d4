"""The counting kernels against a plain sweep in C, numpy, and a library of another field."""

from __future__ import annotations

import ctypes
import shutil
import subprocess
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from light import SECOND, Tags, poisson
from measure import seconds, side_by_side, table
from numpy.typing import NDArray

from tagstream.block import Block
from tagstream.tallies.bins import exact_division
from tagstream.tallies.kernels import fill_pairs
from tagstream.tallies.pairs import PairHistograms

BYTES_A_TAG = 9
CASES = {  # name: (rates, bins on each side, bin, tags)
    "2 x 0.5 M/s, +-10 ns": ([0.5e6] * 2, 100, 100, 20_000_000),
    "2 x 1 M/s, +-50 ns": ([1e6] * 2, 500, 100, 20_000_000),
    "2 x 10 M/s, +-125 ns": ([1e7] * 2, 1_250, 100, 8_000_000),
    "2 x 5 M/s, +-1 us": ([5e6] * 2, 10_000, 100, 4_000_000),
    "2 x 5 M/s, +-10 us": ([5e6] * 2, 100_000, 100, 800_000),
}
WAYS = ("layers", "two pointers", "tagstream", "c", "numpy")
Histogram = NDArray[np.int64]


def c_sweep(folder: Path) -> Callable[..., Histogram] | None:
    """The sweep in C, built here; None without a compiler."""
    compiler = shutil.which("cc") or shutil.which("gcc") or shutil.which("clang")
    if compiler is None:
        return None
    library = folder / "sweep.so"
    source = Path(__file__).with_name("sweep.c")
    flags = ["-O3", "-march=native", "-shared", "-fPIC"]
    subprocess.run([compiler, *flags, "-o", library, source], check=True)
    function = ctypes.CDLL(str(library)).sweep
    long, pointer = ctypes.c_int64, ctypes.c_void_p
    function.argtypes = [pointer, long, pointer, long, long, long, pointer]

    def sweep(starts: Histogram, stops: Histogram, bins: int, bin_ps: int) -> Histogram:
        counts = np.zeros(2 * bins + 1, np.int64)
        address = (array.ctypes.data for array in (starts, stops, counts))
        a, b, c = address
        function(a, starts.size, b, stops.size, bin_ps, bins, c)
        return counts

    return sweep


def numpy_pairs(starts: Histogram, stops: Histogram, bins: int, bin_ps: int) -> Histogram:
    """searchsorted, repeat and bincount: the usual way without a kernel."""
    reach = (2 * bins + 1) * bin_ps
    low = np.searchsorted(2 * stops, 2 * starts - reach)
    count = np.searchsorted(2 * stops, 2 * starts + reach) - low
    first = np.repeat(low - np.cumsum(count) + count, count)
    lags = 2 * (stops[first + np.arange(count.sum())] - np.repeat(starts, count))
    found = np.bincount((lags + reach) // (2 * bin_ps), minlength=2 * bins + 1)
    return np.asarray(found, np.int64)


def neuroscience(starts: Histogram, stops: Histogram, bins: int, bin_ps: int) -> float | None:
    """Tags per second of pynapple on the first 300 000 tags; None if it is not installed."""
    try:
        import pynapple as nap
    except ImportError:
        return None
    few = 150_000
    group = nap.TsGroup({0: nap.Ts(starts[:few] / SECOND), 1: nap.Ts(stops[:few] / SECOND)})
    took = seconds(
        lambda: nap.compute_crosscorrelogram(
            group, binsize=bin_ps / SECOND, windowsize=bins * bin_ps / SECOND
        ),
        runs=3,
    )
    return 2 * few / took


def ours(tags: Tags, pairs: list[tuple[int, int]], number: int, bins: int, bin_ps: int) -> Any:
    """One piece through the histograms, the way that the program chooses."""
    times, channels = tags
    counter = PairHistograms(pairs, number, bins, bin_ps)
    counter.add(Block(times, channels, 0, int(times[-1]) + 1, True))
    return counter.counts


def layers(tags: Tags, bins: int, bin_ps: int) -> Any:
    """The way for sparse light, whatever the light is."""
    counter = PairHistograms([(0, 1)], 2, bins, bin_ps)
    counter.add_sparse(*tags)
    return counter.counts


def two_pointers(starts: Histogram, stops: Histogram, bins: int, bin_ps: int) -> Histogram:
    """The way for dense light, on channels that are separate already, as the sweep in C."""
    counts = np.zeros(2 * bins + 2, np.int64)
    fill_pairs(starts, stops, exact_division(bins, bin_ps), counts)
    return counts[:-1]


def memory_bandwidth() -> float:
    """Bytes per second of reading an array that no cache holds."""
    array = np.ones(32_000_000, np.int64)
    return array.nbytes / seconds(array.sum)


def run(folder: Path) -> dict[str, Any]:
    """Print the tables; return the figures."""
    bandwidth = memory_bandwidth()
    reading = bandwidth / BYTES_A_TAG / 1e6
    print(f"reading memory: {bandwidth / 1e9:.1f} GB/s, {reading:.0f} M tags/s of 9 bytes")
    sweep = c_sweep(folder)
    rows, figures = [], {}
    for name, (rates, bins, bin_ps, count) in CASES.items():
        times, channels = poisson(rates, count)
        starts, stops = times[channels == 0], times[channels == 1]
        tags = times, channels
        ways: dict[str, Callable[[], Any]] = {
            "tagstream": lambda t=tags, k=bins, w=bin_ps: ours(t, [(0, 1)], 2, k, w),
            "two pointers": lambda a=starts, b=stops, k=bins, w=bin_ps: two_pointers(a, b, k, w),
        }
        if count * bins < 2e10:
            ways["layers"] = lambda t=tags, k=bins, w=bin_ps: layers(t, k, w)
        if sweep is not None:
            ways["c"] = lambda a=starts, b=stops, k=bins, w=bin_ps: sweep(a, b, k, w)
        if count * bins < 1e10:
            ways["numpy"] = lambda a=starts, b=stops, k=bins, w=bin_ps: numpy_pairs(a, b, k, w)
        took = side_by_side(ways)
        results = [np.ravel(way()) for way in ways.values()]
        assert all(np.array_equal(results[0], other) for other in results)
        pairs = int(results[0].sum())
        other = neuroscience(starts, stops, bins, bin_ps) if bins <= 1_250 else None
        speed = {way: count / time / 1e6 for way, time in took.items()}
        best = max(speed[way] for way in ("layers", "two pointers") if way in speed)
        figures[name] = {"M tags/s": speed, "pairs a tag": pairs / count}
        rows.append(
            [
                name,
                f"{pairs / count:.2f}",
                *(f"{speed[way]:.0f}" if way in speed else "-" for way in WAYS),
                f"{other / 1e6:.1f}" if other else "-",
                f"{best / speed['c']:.1f}" if "c" in speed else "-",
                f"{pairs * best / count:.0f}",
                f"{best / reading:.2f}",
            ]
        )
    heads = ["two channels", "pairs/tag", *WAYS, "pynapple", "best/c", "M pairs/s", "of memory"]
    table("cross-correlation on one core, M tags/s on the same tags", heads, rows)
    figures["six pairs over one"] = six_pairs()
    return figures | {"memory GB/s": bandwidth / 1e9}


def six_pairs() -> float:
    """Cost of all six pairs of four channels over that of one pair, on the same tags."""
    tags = poisson([0.5e6] * 4, 10_000_000)
    all_pairs = [(a, b) for a in range(4) for b in range(a + 1, 4)]
    took = side_by_side(
        {
            "one": lambda: ours(tags, [(0, 1)], 4, 500, 100),
            "six": lambda: ours(tags, all_pairs, 4, 500, 100),
        }
    )
    ratio = took["six"] / took["one"]
    print(f"\nfour channels of 0.5 M/s, +-50 ns: six pairs cost {ratio:.2f} times one pair")
    return ratio
