"""Stage 3, tallies: ordered blocks to integers.

A tally is an integer accumulator. It is fed pieces that lie in one slice of stream time, gives
up its sums when the slice ends, and keeps only what the next slice needs to see (look-back).
Sums of slices add up to spans, in stream order. Nothing here knows files, units of the user or
estimates.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from importlib import import_module
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block

# What a tally gives up at the end of a slice, and equally what a span holds: arrays by name
# that add up. int64, except `expected_pairs` (float64), a pure function of one slice's integers.
# An array may have shape () where it is the same for all bins; adding broadcasts it.
Sums = Mapping[str, NDArray[Any]]


class Tally(Protocol):
    """An integer accumulator.

    `add` takes pieces of one slice in stream order. `take` returns the sums of the slice that
    ended, int64, owned by the caller, and starts the next slice at zero; look-back survives.
    `axes` are the arrays that do not add up (bin centres and edges), fixed for the run.
    """

    def add(self, piece: Block) -> None: ...

    def take(self) -> dict[str, NDArray[Any]]: ...

    @property
    def axes(self) -> Mapping[str, NDArray[Any]]: ...


_KINDS = {
    "cross-correlation": "tagstream.tallies.cross_correlation:CrossCorrelation",
}


def build_tally(settings: Any, channels: Mapping[str, int]) -> Tally:
    """The tally for a [[tally]] section. `channels`: name -> index in the blocks."""
    module, name = _KINDS[settings.kind].split(":")
    builder: Callable[[Any, Mapping[str, int]], Tally] = getattr(import_module(module), name)
    return builder(settings, channels)


def added(sums: Sums | None, more: Sums) -> dict[str, NDArray[Any]]:
    """The sums of two disjoint pieces of stream time, `sums` (None: nothing yet) the earlier."""
    if sums is None:
        return {name: np.asarray(value) for name, value in more.items()}
    return {name: np.asarray(sums[name] + value) for name, value in more.items()}
