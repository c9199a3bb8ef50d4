"""The kinds of light that a scenario may name."""

from __future__ import annotations

from tagstream.simulation.coherent import Coherent
from tagstream.simulation.emitter import Emitter
from tagstream.simulation.light import Source
from tagstream.simulation.pulsed_emitter import PulsedEmitter

SOURCE_KINDS: dict[str, type[Source]] = {
    "coherent": Coherent,
    "emitter": Emitter,
    "pulsed-emitter": PulsedEmitter,
}
