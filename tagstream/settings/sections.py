"""The sections that every run has, and the whole."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

from pydantic import Field, model_validator

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


class Channel(Section):
    """A named detector or trigger input."""

    input: InputNumber
    delay_ps: DelayPs = Field(0, alias="delay")
    dead_time_ps: NotNegativeTimePs = Field(0, alias="dead_time")


class Conditioning(Section):
    """How tags are put in order and judged."""

    max_disorder_ps: DisorderPs = Field(1_000_000, alias="max_disorder")
    max_jump_ps: JumpPs = Field(10 * PS_PER_S, alias="max_jump")

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
    """Where run folders are made."""

    folder: Path
    name: Annotated[str, Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9_.-]{0,63}$")]


class Alert(Section):
    """A bound on an estimate."""

    estimate: str
    span: str
    above: float | None = None
    below: float | None = None
    hold_ps: NotNegativeTimePs = Field(0, alias="hold")

    @model_validator(mode="after")
    def _check(self) -> Alert:
        if (self.above is None) == (self.below is None):
            raise ValueError("either `above` or `below`")
        return self


class Publish(Section):
    """Where messages are published."""

    address: str


class Control(Section):
    """Where requests are answered."""

    address: str = "auto"


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
    publish: Publish | None = None
    control: Control | None = None

    @property
    def channel_index(self) -> dict[str, int]:
        """Channel name -> index in blocks, in the order of the settings."""
        return {name: index for index, name in enumerate(self.channels)}
