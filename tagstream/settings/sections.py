"""The sections that every run has, and the whole."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, FiniteFloat, model_validator

from tagstream.settings.feeds import FeedSettings
from tagstream.settings.measures import EstimateSettings, TallySettings
from tagstream.settings.quantities import (
    Bytes,
    DelayPs,
    DisorderPs,
    InputNumber,
    JumpPs,
    Name,
    NotNegativeTimePs,
    PositiveTimePs,
)
from tagstream.settings.section import Section
from tagstream.units import PS_PER_S

MOST_PARTS = 64
_PROGRAM = re.compile(r"[^/\0]+|/[^\0]+")  # found in PATH, or at that place


class Channel(Section):
    """A named detector or trigger input."""

    input: InputNumber
    delay_ps: DelayPs = Field(0, alias="delay")
    dead_time_ps: NotNegativeTimePs = Field(0, alias="dead_time")


class Conditioning(Section):
    """How tags are put in order and judged."""

    max_disorder_ps: DisorderPs = Field(1_000_000, alias="max_disorder")
    max_jump_ps: JumpPs = Field(10 * PS_PER_S, alias="max_jump")
    overload: Literal["shed", "wait"] = "shed"  # more than can be processed: leave out, or block

    @model_validator(mode="after")
    def _check(self) -> Conditioning:
        if self.max_jump_ps <= self.max_disorder_ps:
            raise ValueError("`max_jump` longer than `max_disorder`")
        return self


class Rolling(Section):
    """Pieces of stream time, and the spans that readers look at."""

    slice_ps: PositiveTimePs = Field(PS_PER_S, alias="slice")
    spans_ps: list[PositiveTimePs] = Field(
        default_factory=lambda: [10 * PS_PER_S, 60 * PS_PER_S], alias="spans"
    )
    memory: Bytes = 300_000_000

    @model_validator(mode="after")
    def _check(self) -> Rolling:
        if self.slice_ps % 1_000_000_000:
            raise ValueError("`slice` a multiple of 1 ms")
        for span in self.spans_ps:
            if span % self.slice_ps:
                raise ValueError("each of `spans` a multiple of `slice`")
        if len(set(self.spans_ps)) != len(self.spans_ps):
            raise ValueError("each span once in `spans`")
        return self

    def parts(self, span_ps: int) -> tuple[int, int]:
        """(parts of a span, slices in each): at most 64, a long span advances by span / 60."""
        slices = span_ps // self.slice_ps
        each = 1 if slices <= MOST_PARTS else -(-slices // 60)
        return slices // each, each


class Results(Section):
    """Where run folders are made, and how often latest.h5 is replaced."""

    folder: Path
    every_ps: PositiveTimePs | None = Field(None, alias="every")  # absent: 1 s, longer when large
    min_free: Bytes = 2_000_000_000  # below this, results pause
    name: Annotated[str, Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9_.-]{0,63}$")]


class Recording(Section):
    """Raw tags kept while the run goes on, in segments."""

    folder: Path | None = None  # absent: the run folder
    segment: Bytes = 4_000_000_000  # a segment is closed when it has this size ...
    segment_time_ps: PositiveTimePs | None = Field(None, alias="segment_time")  # ... or length
    keep: Bytes | None = None  # of closed segments of this run; absent: all
    min_free: Bytes = 4_000_000_000  # below this, recording pauses


class Alert(Section):
    """A bound on an estimate over a span, or on a number of the health of the run."""

    estimate: str | None = None
    span: str | None = None
    health: str | None = None
    above: FiniteFloat | None = None
    below: FiniteFloat | None = None
    clear: FiniteFloat | None = None  # absent: the same bound
    hold_ps: NotNegativeTimePs = Field(0, alias="hold")
    command: list[str] = Field(default_factory=list)  # program and arguments; no shell

    @model_validator(mode="after")
    def _check(self) -> Alert:
        if (self.above is None) == (self.below is None):
            raise ValueError("either `above` or `below`")
        if (self.estimate is None) == (self.health is None):
            raise ValueError("either `estimate` with `span`, or `health`")
        if (self.estimate is None) != (self.span is None):
            raise ValueError("`span` with `estimate`, and only there")
        if self.clear is not None and (
            (self.above is not None and self.clear > self.above)
            or (self.below is not None and self.clear < self.below)
        ):
            raise ValueError("`clear` on the quiet side of the bound")
        if self.command and not _PROGRAM.fullmatch(self.command[0]):
            raise ValueError("`command` a program by its name or its whole path, then arguments")
        if any("\0" in part for part in self.command):
            raise ValueError("`command` without zero bytes")
        return self


class Publish(Section):
    """Where messages are published."""

    address: str


class Control(Section):
    """Where requests are answered."""

    address: str = "auto"


class Metrics(Section):
    """Where metrics are served as Prometheus text."""

    listen: str = "127.0.0.1:9464"


class Security(Section):
    """Keys for sockets that others can reach."""

    own_keys: Path = Field(alias="keys")  # the folder with the keys of this program
    authorised: Path | None = None  # the folder with the public keys of those who may come in


class Settings(Section):
    """The whole settings file, checked."""

    title: str = ""
    feed: FeedSettings
    channels: dict[Name, Channel]
    conditioning: Conditioning = Field(default_factory=Conditioning)
    rolling: Rolling = Field(default_factory=Rolling)
    tallies: list[TallySettings] = Field(default_factory=list, alias="tally")
    estimates: list[EstimateSettings] = Field(default_factory=list, alias="estimate")
    alerts: list[Alert] = Field(default_factory=list, alias="alert")
    results: Results
    recording: Recording | None = None
    publish: Publish | None = None
    control: Control | None = None
    metrics: Metrics | None = None
    security: Security | None = None

    @property
    def channel_index(self) -> dict[str, int]:
        """Channel name -> index in blocks, in the order of the settings."""
        return {name: index for index, name in enumerate(self.channels)}
