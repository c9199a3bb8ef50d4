"""Prints the estimates of a simulated run beside what is known of the light.

usage: python tools/beside_truth.py RUN ESTIMATE=TRUTH...
"""

from __future__ import annotations

import sys

import tagstream


def main(folder: str, *pairs: str) -> None:
    """One line per pair; the interval should hold the truth in two of three cases."""
    run = tagstream.open_run(folder)
    print(f"{'estimate':<10} {'value':>12} {'68.3 % interval':>27} {'truth':>12}")
    for pair in pairs:
        name, _, known = pair.partition("=")
        found, truth = run.estimates[name]["run"], float(run.truth[known])
        distance = truth - found.value
        half = found.upper - found.value if distance > 0 else found.value - found.lower
        print(
            f"{name:<10} {found.value:>12.6g} {f'{found.lower:.6g} to {found.upper:.6g}':>27}"
            f" {truth:>12.6g}   {abs(distance) / half:.1f} half widths apart"
        )


if __name__ == "__main__":
    main(*sys.argv[1:])
