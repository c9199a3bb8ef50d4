"""What a live run is doing, from what is measured of it."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

from tagstream.pipeline import State

STARVED_S = 5.0  # without a tag for so long, rates are of the past
BEHIND_S = 2.0  # from the arrival of a tag to its counting

Numbers = Mapping[str, int | float | str]


@dataclass(slots=True)
class Flow:
    """When tags last came and were counted; written by the counting thread.

    clock: monotonic. arrived_s: of the newest piece with tags that was counted. waited_s: from
    its arrival to its counting.
    """

    clock: Callable[[], float]
    arrived_s: float | None = None
    waited_s: float = 0.0

    def counted(self, arrived_s: float | None, tags: int) -> None:
        """A piece was counted; tags: that were received so far is larger than before if any."""
        if arrived_s is None or tags == 0:
            return
        self.arrived_s, self.waited_s = arrived_s, self.clock() - arrived_s

    def numbers(self) -> dict[str, int | float | str]:
        """For the health: last_tag_age_s, queued_s."""
        if self.arrived_s is None:
            return {}
        return {
            "last_tag_age_s": round(self.clock() - self.arrived_s, 3),
            "queued_s": round(self.waited_s, 3),
        }


def state_of(numbers: Numbers, stopping: bool) -> State:
    """The state that the numbers tell, the worst first.

    numbers: degraded (1 while results cannot be written), queued_s, shed_fraction,
    last_tag_age_s; what is missing tells nothing.
    """
    if stopping:
        return State.STOPPING
    if numbers.get("degraded"):
        return State.DEGRADED
    if float(numbers.get("queued_s", 0)) > BEHIND_S or float(numbers.get("shed_fraction", 0)) > 0:
        return State.BEHIND
    if float(numbers.get("last_tag_age_s", 0)) > STARVED_S:
        return State.STARVED
    return State.RUNNING


class Around:
    """All that is known of a run besides its tags, with the state that follows from it.

    sources: each gives some numbers; later ones prevail.
    """

    def __init__(self, sources: list[Callable[[], Numbers]], stopping: Callable[[], bool]) -> None:
        self._sources, self._stopping = sources, stopping

    def __call__(self) -> dict[str, int | float | str]:
        numbers: dict[str, int | float | str] = {}
        for source in self._sources:
            numbers.update(source())
        state = state_of(numbers, self._stopping())
        flags = {flag: int(state is flag) for flag in (State.STARVED, State.BEHIND)}
        return {**numbers, **{str(flag): on for flag, on in flags.items()}, "state": str(state)}
