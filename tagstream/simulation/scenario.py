"""A scenario: one TOML file that says what is simulated; every problem is reported at once."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from pathlib import Path
from typing import Annotated, Any, Literal, TypeVar

from pydantic import Field, model_validator

from tagstream.errors import SettingsError
from tagstream.settings.load import read_toml
from tagstream.settings.quantities import DelayPs, InputNumber, PositiveTimePs
from tagstream.settings.section import Section
from tagstream.settings.validation import nearest, shown, validate_section
from tagstream.simulation.drift import Drift, Part
from tagstream.simulation.jitter import FWHM_PER_SIGMA
from tagstream.simulation.light import HERALD, REFLECTED, TRANSMITTED, Arm, Source
from tagstream.simulation.quantities import CoarseTickPs, RateHz, Share, ShortTimePs
from tagstream.simulation.sources import SOURCE_KINDS
from tagstream.units import PS_PER_S, format_time

S = TypeVar("S", bound=Section)
BESIDE = {TRANSMITTED: REFLECTED, REFLECTED: TRANSMITTED, HERALD: ""}


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

    def split(self, port: str) -> float:
        """What part of the light goes to a port; the herald's detector is not behind it."""
        parts = {TRANSMITTED: self.transmittance, REFLECTED: self.reflectance, HERALD: 1.0}
        return parts.get(port, 0.0)


class Detector(Section):
    """A detector at one port of the splitter, and the input that its tags arrive at."""

    input: InputNumber
    port: Literal["transmitted", "reflected", "herald"]
    efficiency: Share
    jitter_fwhm_ps: ShortTimePs = Field(0, alias="jitter_fwhm")
    dead_time_ps: ShortTimePs = Field(0, alias="dead_time")
    dark_rate_hz: RateHz = Field(0.0, alias="dark_rate")
    delay_ps: ShortTimePs = Field(0, alias="delay")  # of its tags
    delay_drift_ps: DelayPs = Field(0, alias="delay_drift_per_hour")  # up to 1 us in all
    afterpulse_probability: Part = 0.0  # that a count is followed by one, after the dead time
    afterpulse_ps: ShortTimePs = Field(0, alias="afterpulse_time")  # mean, from its end on
    crosstalk_probability: Part = 0.0  # that a count makes one in each other detector
    crosstalk_ps: ShortTimePs = Field(0, alias="crosstalk_delay")

    @model_validator(mode="after")
    def _check(self) -> Detector:
        if (self.afterpulse_probability > 0) != (self.afterpulse_ps > 0):
            raise ValueError("`afterpulse_probability` and `afterpulse_time` together, or neither")
        if (self.crosstalk_probability > 0) != (self.crosstalk_ps > 0):
            raise ValueError("`crosstalk_probability` and `crosstalk_delay` together, or neither")
        return self

    def arm(self, splitter: Splitter) -> Arm:
        """The detector as the light in one input of the splitter sees it."""
        split = splitter.split(self.port)
        return Arm(
            port=self.port,
            share=split * self.efficiency,
            jitter_sigma_ps=self.jitter_fwhm_ps / FWHM_PER_SIGMA,
            dead_time_ps=self.dead_time_ps,
            dark_rate_hz=self.dark_rate_hz,
            split=split,
            beside=splitter.split(BESIDE[self.port]),
            efficiency=self.efficiency,
            delay_ps=self.delay_ps,
            delay_drift=float(self.delay_drift_ps),
            afterpulse_probability=self.afterpulse_probability,
            afterpulse_ps=self.afterpulse_ps,
            crosstalk_probability=self.crosstalk_probability,
            crosstalk_ps=self.crosstalk_ps,
        )


class Clock(Section):
    """A tag for each pulse of the source, or for each `divider` pulses."""

    input: InputNumber
    divider: Annotated[int, Field(ge=1, le=10**9, strict=True)] = 1


class Truth(Section):
    """For what the truth is stated."""

    window_ps: PositiveTimePs | None = Field(None, alias="window")  # full width, for g2(0)


NO_DRIFT = Drift()


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
    drift: Drift = NO_DRIFT

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
        return self.source.seen_by([detector.arm(self.splitter) for detector in self.detectors])

    def pair(self, arms: Sequence[Arm]) -> tuple[Arm, Arm] | None:
        """Those at the two outputs of the splitter, if both have a detector; as in the file."""
        found = [arm for arm in arms if arm.port != HERALD]
        return (found[0], found[1]) if len(found) == 2 else None

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
    drift = reader.table(Drift, table.get("drift", {}), "[drift]")
    for text in _contradictions(source, detectors, clock, truth):
        reader.problem(text)
    for text in _too_bright(detectors, drift):
        reader.problem(text)
    if problems or not (run and source and splitter and truth and drift):
        raise SettingsError(problems)
    kind = table["source"]["kind"]
    return Scenario(kind, run, source, splitter, tuple(detectors), clock, truth, drift)


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
    for port in sorted(set(ports) - set(source.ports)):
        known = ", ".join(source.ports)
        yield f'[[detector]] port: found "{port}", which this source has not; known are {known}'
    if HERALD in ports and len(ports) == 1:
        yield "[[detector]]: only a herald; right would be a detector at the splitter too"
    period = source.pulse_period
    if clock is not None and period is None:
        yield "[clock]: this source has no pulses; remove the table"
    window = truth.window_ps if truth is not None else None
    if window is not None and period is not None and window > period:
        yield f"[truth] window: longer than the period, {format_time(period)}"


def _too_bright(detectors: list[Detector], drift: Drift | None) -> Iterator[str]:
    """Detectors that would have to see more than all light at the top of a swing."""
    for number, detector in enumerate(detectors, 1):
        if drift is not None and detector.efficiency * drift.most > 1:
            yield (
                f"[[detector]] {number} efficiency: found {detector.efficiency}; with"
                f" [drift] swing = {drift.swing} right would be at most {1 / drift.most:.6g}"
            )


class _Reader:
    """Checks table by table, so that a problem in one hides no problem in another."""

    def __init__(self, file: str, problems: list[str]) -> None:
        self._file, self._problems = file, problems

    def problem(self, text: str) -> None:
        self._problems.append(f"{self._file}: {text}")

    def run(self, table: dict[str, Any]) -> Run | None:
        own = Run.keys()
        known = [*own, "source", "splitter", "detector", "clock", "truth", "drift"]
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
            self.problem("[[detector]]: missing; right would be one such table for each")
            return []
        found = [
            self.table(Detector, table, f"[[detector]] {number}")
            for number, table in enumerate(value, 1)
        ]
        return [detector for detector in found if detector is not None]
