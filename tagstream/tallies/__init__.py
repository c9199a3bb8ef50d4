"""Stage 3, tallies: ordered blocks to integers.

A tally is an integer accumulator. It is fed pieces that lie in one slice of stream time, gives
up its sums when the slice ends, and keeps only what the next slice needs to see (look-back).
Sums of slices add up to spans, in stream order. Nothing here knows files, units of the user or
estimates.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from importlib import import_module
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from tagstream.block import Block

# What a tally gives up at the end of a slice, and equally what a span holds: arrays by name
# that add up. int64, except `expected_pairs` (float64), a pure function of one slice's integers.
# An array may have shape () where it is the same for all bins; adding broadcasts it.
Sums = Mapping[str, NDArray[Any]]


SINGLES = "channels"  # the name of the sums of the tally that every run has


class Tally(Protocol):
    """An integer accumulator; one may serve several [[tally]] sections in a single pass.

    `add` takes pieces of one slice in stream order. `take` returns the sums of the slice that
    ended, by name of section, owned by the caller, and starts the next slice at zero; look-back
    survives. It is given the singles of that slice, so that no tally counts them again. `axes`,
    by name, are the arrays that do not add up (bin centres and edges).
    """

    @property
    def axes(self) -> Mapping[str, Mapping[str, NDArray[Any]]]: ...

    def add(self, piece: Block) -> None: ...

    def take(self, singles: Sums) -> dict[str, dict[str, NDArray[Any]]]: ...


# kind -> "module:function" that builds the tallies of all sections of that kind
_KINDS = {
    "cross-correlation": "tagstream.tallies.cross_correlation:build",
}


def build_tallies(sections: Sequence[Any], channels: Mapping[str, int]) -> list[Tally]:
    """The tallies for the [[tally]] sections. `channels`: name -> index in the blocks."""
    tallies: list[Tally] = []
    for kind, place in _KINDS.items():
        of_kind = [section for section in sections if section.kind == kind]
        module, name = place.split(":")
        builder: Callable[..., list[Tally]] = getattr(import_module(module), name)
        tallies += builder(of_kind, channels)
    return tallies


def added(sums: Sums | None, more: Sums) -> dict[str, NDArray[Any]]:
    """The sums of two disjoint pieces of stream time, `sums` (None: nothing yet) the earlier."""
    if sums is None:
        return {name: np.asarray(value) for name, value in more.items()}
    return {name: np.asarray(sums[name] + value) for name, value in more.items()}
