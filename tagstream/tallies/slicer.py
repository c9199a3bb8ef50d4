"""Blocks to pieces that lie in one slice each."""

from __future__ import annotations

from collections.abc import Iterator

from tagstream.block import Block


def cut_at_slices(block: Block, slice_ps: int) -> Iterator[tuple[int, Block]]:
    """(slice index, piece) for a block; slice k is [k, k + 1) slice_ps of stream time."""
    rest = block
    while True:
        index = rest.begin_ps // slice_ps
        boundary = (index + 1) * slice_ps
        if rest.end_ps <= boundary:
            yield index, rest
            return
        head, rest = rest.cut(boundary)
        yield index, head
