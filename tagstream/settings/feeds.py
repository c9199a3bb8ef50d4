"""The [feed] section: one class for each kind."""

from __future__ import annotations

from fractions import Fraction
from math import gcd
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, model_validator

from tagstream.settings.quantities import Bytes, PositiveTimePs, TickPs, TimePs, check_tick
from tagstream.settings.section import Section
from tagstream.units import format_time

BitField = Annotated[tuple[int, int], Field(description="first bit and number of bits")]


class RecordingFeed(Section):
    """A recording of this program, or any NeXus file with an NXevent_data group."""

    kind: Literal["recording"]
    path: Path
    group: str | None = None  # path of the NXevent_data group; absent: the first one


class ColumnsFeed(Section):
    """A column of times and a column of inputs: CSV, a pair of .npy files, or HDF5 datasets."""

    kind: Literal["columns"]
    path: Path
    time_column: str
    channel_column: str
    tick_ps: TickPs = Field(alias="tick")
    begin_ps: TimePs | None = Field(None, alias="begin")
    end_ps: TimePs | None = Field(None, alias="end")

    @model_validator(mode="after")
    def _check_interval(self) -> ColumnsFeed:
        check_interval(self.begin_ps, self.end_ps)
        return self


class Marker(Section):
    """Records that are no detections: all `where` bits must equal `equals`."""

    where: BitField | list[BitField]
    equals: int | list[int]
    means: Literal["rollover", "gap", "skip"]
    count: BitField | None = None
    step: int | None = Field(None, gt=0)  # ticks; absent: 2 ** bits of time_bits

    @property
    def conditions(self) -> list[tuple[int, int, int]]:
        """(first bit, bits, value) of each condition."""
        where = self.where if isinstance(self.where, list) else [self.where]
        equals = self.equals if isinstance(self.equals, list) else [self.equals]
        return [(first, bits, value) for (first, bits), value in zip(where, equals, strict=True)]

    @model_validator(mode="after")
    def _check(self) -> Marker:
        many = isinstance(self.where, list), isinstance(self.equals, list)
        if many[0] != many[1] or (
            isinstance(self.where, list)
            and isinstance(self.equals, list)
            and len(self.where) != len(self.equals)
        ):
            raise ValueError("as many values in `equals` as there are bit fields in `where`")
        for first, bits, value in self.conditions:
            check_bits("where", (first, bits))
            if not 0 <= value < 2**bits:
                raise ValueError(f"`equals` between 0 and {2**bits - 1}, what {bits} bits can hold")
        if self.count is not None:
            check_bits("count", self.count)
        if self.means != "rollover" and (self.count is not None or self.step is not None):
            raise ValueError('`count` and `step` only where means = "rollover"')
        return self


class FineTime(Section):
    """A second field of the time, with a tick of its own: added to the first, or taken off."""

    bits: BitField
    tick_ps: TickPs = Field(alias="tick")
    sign: Literal["+", "-"] = "+"


class RecordLayout(Section):
    """Fixed-size binary records, read as one unsigned integer whose bit 0 is the least."""

    record_bytes: int = Field(ge=2, le=16, strict=True)
    byte_order: Literal["little", "big"] = "little"
    tick_ps: TickPs = Field(alias="tick")
    time_bits: BitField
    channel_bits: BitField
    fine: FineTime | None = None
    wrap: Literal["markers", "implicit"] = "markers"  # what tells that the clock began again
    markers: list[Marker] = Field(default_factory=list, alias="marker")

    @property
    def native_tick_ps(self) -> Fraction:
        """The longest tick of which `tick` and that of `fine` are multiples."""
        if self.fine is None:
            return self.tick_ps
        a, b = self.tick_ps, self.fine.tick_ps
        common = gcd(a.numerator * b.denominator, b.numerator * a.denominator)
        return Fraction(common, a.denominator * b.denominator)

    @property
    def factors(self) -> tuple[int, int]:
        """Native ticks in a count of `time_bits`, and in one of `fine`; signed, 0 without."""
        native = self.native_tick_ps
        if self.fine is None:
            return 1, 0
        fine = int(self.fine.tick_ps / native)
        return int(self.tick_ps / native), fine if self.fine.sign == "+" else -fine

    @model_validator(mode="after")
    def _check_clock(self) -> RecordLayout:
        rollovers = any(marker.means == "rollover" for marker in self.markers)
        if self.wrap == "implicit" and rollovers:
            raise ValueError('wrap = "implicit", or markers that mean rollover, not both')
        if self.wrap == "implicit" and self.time_bits[1] > 62:
            raise ValueError('wrap = "implicit" only with time_bits of at most 62 bits')
        if self.fine is None:
            return self
        check_tick(self.native_tick_ps)
        coarse, fine = self.factors
        longest = 2 ** self.time_bits[1] * coarse + 2 ** self.fine.bits[1] * abs(fine)
        if longest > 2**62:
            raise ValueError(
                "fewer bits, or ticks with a longer common part: together, time_bits and fine"
                f" reach {longest} times {format_time(self.native_tick_ps)}; at most 2**62 fit"
            )
        return self

    @model_validator(mode="after")
    def _check_fields(self) -> RecordLayout:
        total = 8 * self.record_bytes
        fields = [("time_bits", self.time_bits), ("channel_bits", self.channel_bits)]
        if self.fine is not None:
            fields.append(("fine bits", self.fine.bits))
        for number, marker in enumerate(self.markers, 1):
            fields += [(f"where of marker {number}", (a, b)) for a, b, _ in marker.conditions]
            if marker.count is not None:
                fields.append((f"count of marker {number}", marker.count))
        for name, (first, bits) in fields:
            check_bits(name, (first, bits))
            if first + bits > total:
                raise ValueError(
                    f"{name} = [{first}, {bits}] within the {total} bits of a record"
                    f" of {self.record_bytes} bytes"
                )
        if self.channel_bits[1] > 16:
            raise ValueError("channel_bits of at most 16 bits")
        return self


class RecordsFeed(RecordLayout):
    """A file of fixed-size binary records."""

    kind: Literal["records"]
    path: Path
    skip_bytes: int = Field(0, ge=0, strict=True)
    follow: bool = Field(False, strict=True)  # the file still grows: wait at its end for more
    begin_ps: TimePs | None = Field(None, alias="begin")
    end_ps: TimePs | None = Field(None, alias="end")

    @model_validator(mode="after")
    def _check_interval(self) -> RecordsFeed:
        check_interval(self.begin_ps, self.end_ps)
        if self.follow and self.begin_ps is not None:
            raise ValueError("`begin` and `end` only for a file that no longer grows")
        return self


class SimulationFeed(Section):
    """Simulated light with known truth; the same seed gives the same tags."""

    kind: Literal["simulation"]
    scenario: Path
    seed: int = Field(1, ge=0, strict=True)
    duration_ps: PositiveTimePs | None = Field(None, alias="duration")  # absent: the scenario's


class TcpFeed(RecordLayout):
    """Records arriving over TCP."""

    kind: Literal["tcp"]
    listen: str | None = None
    connect: str | None = None

    @model_validator(mode="after")
    def _check_end(self) -> TcpFeed:
        if (self.listen is None) == (self.connect is None):
            raise ValueError('either `listen` or `connect`, an address such as "127.0.0.1:7700"')
        return self


class StdinFeed(RecordLayout):
    """Records on standard input."""

    kind: Literal["stdin"]


class ZmqFeed(Section):
    """Messages of tags over ZeroMQ."""

    kind: Literal["zmq"]
    address: str
    pattern: Literal["pull", "sub"] = "pull"
    bind: bool = False
    stream: str | None = None  # the only stream that counts; absent: that of the first message
    receive_queue: int = Field(4, ge=1, le=1000, strict=True)  # messages
    max_message: Bytes = 64_000_000
    server_key: Path | None = None  # public key of a peer that binds and wants encryption


FeedSettings = (
    RecordingFeed | ColumnsFeed | RecordsFeed | SimulationFeed | TcpFeed | StdinFeed | ZmqFeed
)
FEED_KINDS: dict[str, type[Section]] = {
    "recording": RecordingFeed,
    "columns": ColumnsFeed,
    "records": RecordsFeed,
    "simulation": SimulationFeed,
    "tcp": TcpFeed,
    "stdin": StdinFeed,
    "zmq": ZmqFeed,
}
LIVE_KINDS = ("tcp", "stdin", "zmq")


def is_live(feed: FeedSettings) -> bool:
    """Whether its tags come while they are made, and never end by themselves."""
    return feed.kind in LIVE_KINDS or (isinstance(feed, RecordsFeed) and feed.follow)


def check_bits(name: str, field: tuple[int, int]) -> None:
    """Raise ValueError unless `field` is (first bit >= 0, 1 to 63 bits)."""
    first, bits = field
    if first < 0 or not 1 <= bits <= 63:
        raise ValueError(f"{name} = [first bit from 0 on, 1 to 63 bits]")


def check_interval(begin_ps: int | None, end_ps: int | None) -> None:
    """Raise ValueError unless both or none are given and begin is before end."""
    if (begin_ps is None) != (end_ps is None):
        raise ValueError("`begin` and `end` together, or neither")
    if begin_ps is not None and end_ps is not None and begin_ps >= end_ps:
        raise ValueError("`begin` before `end`")
