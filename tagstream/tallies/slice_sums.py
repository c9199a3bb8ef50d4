"""What all tallies of a run count in one slice, in parts where a mark splits one of them."""

from __future__ import annotations

from collections.abc import Sequence

from tagstream.block import Block
from tagstream.tallies import SINGLES, Sums, Tally, added
from tagstream.tallies.singles import Singles
from tagstream.tallies.split import Splits


class SliceSums:
    """Feeds pieces of one slice to the tallies and adds up what they give.

    Where nothing is split a slice is one part. Where something is, all tallies are cut at a
    change of value; integers add up to the same, only expected pairs are those of the parts.
    """

    def __init__(self, singles: Singles, tallies: Sequence[Tally], splits: Splits) -> None:
        self._singles, self._tallies, self._splits = singles, tallies, splits
        self._sums: dict[str, Sums] = {}  # of the parts that have ended
        self._part_is_open = False

    def add(self, piece: Block) -> None:
        """Count a piece that lies in the slice."""
        rest = piece
        while (at_ps := self._splits.next_change(rest)) is not None:
            if at_ps > rest.begin_ps:
                head, rest = rest.cut(at_ps)
                self._count(head)
            self._end_part()
            self._splits.change(at_ps)
        self._count(rest)

    def take(self) -> dict[str, Sums]:
        """The sums of the slice that ended, by name of tally; the next begins at zero."""
        self._end_part()
        sums, self._sums = self._sums, {}
        return sums

    def _count(self, part: Block) -> None:
        self._part_is_open = True
        self._singles.add(part)
        for tally in self._tallies:
            tally.add(part)

    def _end_part(self) -> None:
        if not self._part_is_open:
            return
        self._part_is_open = False
        singles = self._singles.take()
        sums: dict[str, Sums] = {SINGLES: singles}
        for tally in self._tallies:
            sums |= tally.take(singles)
        self._splits.add(sums)
        self._sums = {name: added(self._sums.get(name), more) for name, more in sums.items()}
