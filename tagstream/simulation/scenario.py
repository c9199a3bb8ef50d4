"""A scenario: one TOML file that says what is simulated; every problem is reported at once."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Annotated, Any, Literal, TypeVar

from pydantic import Field, model_validator

from tagstream.errors import SettingsError
from tagstream.settings.load import read_toml
from tagstream.settings.quantities import InputNumber, PositiveTimePs
from tagstream.settings.section import Section
from tagstream.settings.validation import nearest, shown, validate_section
from tagstream.simulation.jitter import FWHM_PER_SIGMA
from tagstream.simulation.light import Arm, Source
from tagstream.simulation.quantities import CoarseTickPs, RateHz, Share, ShortTimePs
from tagstream.simulation.sources import SOURCE_KINDS
from tagstream.units import PS_PER_S, format_time

S = TypeVar("S", bound=Section)


class Run(Section):
    """The keys above all tables."""

    title: str = ""
    duration_ps: PositiveTimePs = Field(alias="duration")
    tick_ps: CoarseTickPs = Field(Fraction(1), alias="tick")  # times are rounded down to it


class Splitter(Section):
    """A beam splitter; what it neither transmits nor reflects is lost."""

    transmittance: Share
    reflectance: Share

    @model_validator(mode="after")
    def _check(self) -> Splitter:
        if self.transmittance + self.reflectance > 1 + 1e-12:
            raise ValueError("`transmittance` and `reflectance` with a sum of at most 1")
        return self


class Detector(Section):
    """A detector at one port of the splitter, and the input that its tags arrive at."""

    input: InputNumber
    port: Literal["transmitted", "reflected"]
    efficiency: Share
    jitter_fwhm_ps: ShortTimePs = Field(0, alias="jitter_fwhm")
    dead_time_ps: ShortTimePs = Field(0, alias="dead_time")
    dark_rate_hz: RateHz = Field(0.0, alias="dark_rate")

    def arm(self, splitter: Splitter) -> Arm:
        """The detector as the light sees it."""
        through = self.port == "transmitted"
        return Arm(
            port=self.port,
            share=(splitter.transmittance if through else splitter.reflectance) * self.efficiency,
            jitter_sigma_ps=self.jitter_fwhm_ps / FWHM_PER_SIGMA,
            dead_time_ps=self.dead_time_ps,
            dark_rate_hz=self.dark_rate_hz,
        )


class Clock(Section):
    """A tag for each pulse of the source, or for each `divider` pulses."""

    input: InputNumber
    divider: Annotated[int, Field(ge=1, le=10**9, strict=True)] = 1


class Truth(Section):
    """For what the truth is stated."""

    window_ps: PositiveTimePs | None = Field(None, alias="window")  # full width, for g2(0)


@dataclass(frozen=True, slots=True)
class Scenario:
    """A checked scenario."""

    kind: str
    run: Run
    source: Source
    splitter: Splitter
    detectors: tuple[Detector, ...]
    clock: Clock | None
    truth: Truth

    @property
    def title(self) -> str:
        """What is simulated, in a few words; may be empty."""
        return self.run.title

    @property
    def duration_ps(self) -> int:
        """How long the run is, unless the caller says otherwise."""
        return self.run.duration_ps

    @property
    def tick_ps(self) -> Fraction:
        """The native tick."""
        return self.run.tick_ps

    @property
    def arms(self) -> tuple[Arm, ...]:
        """The detectors as the light sees them, in the order of the file."""
        return tuple(detector.arm(self.splitter) for detector in self.detectors)

    @property
    def clock_rate_hz(self) -> float:
        """Clock tags per second; 0 without clock."""
        period = self.source.pulse_period
        if self.clock is None or period is None:
            return 0.0
        return float(PS_PER_S / (period * self.clock.divider))

    @property
    def g2_window_ps(self) -> float:
        """The window for which the truth states g2(0)."""
        stated = self.truth.window_ps
        return self.source.default_window_ps if stated is None else float(stated)


def load_scenario(file: Path) -> Scenario:
    """Read and check a scenario file. Raises SettingsError that holds every problem found."""
    return build_scenario(read_toml(file, "scenario"), file.name)


def build_scenario(table: dict[str, Any], file: str) -> Scenario:
    """The scenario in a TOML table; `file` is named in the problems of a SettingsError."""
    problems: list[str] = []
    reader = _Reader(file, problems)
    run = reader.run(table)
    source = reader.source(table.get("source"))
    splitter = reader.table(Splitter, table.get("splitter"), "[splitter]")
    detectors = reader.detectors(table.get("detector"))
    clock = reader.table(Clock, table["clock"], "[clock]") if "clock" in table else None
    truth = reader.table(Truth, table.get("truth", {}), "[truth]")
    for text in _contradictions(source, detectors, clock, truth):
        reader.problem(text)
    if problems or run is None or source is None or splitter is None or truth is None:
        raise SettingsError(problems)
    kind = table["source"]["kind"]
    return Scenario(kind, run, source, splitter, tuple(detectors), clock, truth)


def _contradictions(
    source: Source | None, detectors: list[Detector], clock: Clock | None, truth: Truth | None
) -> Iterator[str]:
    """What does not fit together among tables that are right in themselves."""
    inputs = [detector.input for detector in detectors] + ([clock.input] if clock else [])
    for number in sorted({number for number in inputs if inputs.count(number) > 1}):
        yield f"input: found {number} more than once; right would be one input for each"
    ports = [detector.port for detector in detectors]
    for port in sorted({port for port in ports if ports.count(port) > 1}):
        yield f'[[detector]] port: found "{port}" more than once; one detector for each port'
    if source is None:
        return
    period = source.pulse_period
    if clock is not None and period is None:
        yield "[clock]: this source has no pulses; remove the table"
    window = truth.window_ps if truth is not None else None
    if window is not None and period is not None and window > period:
        yield f"[truth] window: longer than the period, {format_time(period)}"


class _Reader:
    """Checks table by table, so that a problem in one hides no problem in another."""

    def __init__(self, file: str, problems: list[str]) -> None:
        self._file, self._problems = file, problems

    def problem(self, text: str) -> None:
        self._problems.append(f"{self._file}: {text}")

    def run(self, table: dict[str, Any]) -> Run | None:
        own = Run.keys()
        known = [*own, "source", "splitter", "detector", "clock", "truth"]
        for key in table:
            if key not in known:
                self.problem(f"{key}: unknown section or key; {nearest(key, known)}")
        head = {key: table[key] for key in own if key in table}
        return validate_section(Run, head, "scenario", self._problems, self._file)

    def is_table(self, value: Any, where: str) -> bool:
        if value is None:
            self.problem(f"{where}: missing; it must be given")
        elif not isinstance(value, dict):
            self.problem(f"{where}: found {shown(value)}; right would be a table")
        return isinstance(value, dict)

    def table(self, model: type[S], value: Any, where: str) -> S | None:
        if not self.is_table(value, where):
            return None
        return validate_section(model, value, where, self._problems, self._file)

    def source(self, value: Any) -> Source | None:
        if not self.is_table(value, "[source]"):
            return None
        kind = value.get("kind")
        if not isinstance(kind, str) or kind not in SOURCE_KINDS:
            found = "missing" if kind is None else f"found {shown(kind)}"
            self.problem(f"[source] kind: {found}; {nearest(str(kind), list(SOURCE_KINDS))}")
            return None
        return self.table(SOURCE_KINDS[kind], value, "[source]")

    def detectors(self, value: Any) -> list[Detector]:
        if not isinstance(value, list) or not value:
            self.problem("[[detector]]: missing; right would be one or two such tables")
            return []
        found = [
            self.table(Detector, table, f"[[detector]] {number}")
            for number, table in enumerate(value, 1)
        ]
        return [detector for detector in found if detector is not None]
