"""The kinds of light that a scenario may name."""

from __future__ import annotations

from tagstream.simulation.blinking_emitter import BlinkingEmitter, PulsedBlinkingEmitter
from tagstream.simulation.coherent import Coherent
from tagstream.simulation.dip_scan import DipScan
from tagstream.simulation.emitter import Emitter
from tagstream.simulation.interferometer import UnbalancedInterferometer
from tagstream.simulation.light import Source
from tagstream.simulation.pairs import Pairs
from tagstream.simulation.pulsed_emitter import PulsedEmitter
from tagstream.simulation.pulsed_light import PulsedCoherent, PulsedThermal
from tagstream.simulation.pulsed_pairs import PulsedPairs
from tagstream.simulation.shelving_emitter import ShelvingEmitter
from tagstream.simulation.thermal import Thermal
from tagstream.simulation.two_photon import TwoPhotonInterference

SOURCE_KINDS: dict[str, type[Source]] = {
    "coherent": Coherent,
    "thermal": Thermal,
    "emitter": Emitter,
    "blinking-emitter": BlinkingEmitter,
    "shelving-emitter": ShelvingEmitter,
    "pairs": Pairs,
    "pulsed-coherent": PulsedCoherent,
    "pulsed-thermal": PulsedThermal,
    "pulsed-emitter": PulsedEmitter,
    "pulsed-blinking-emitter": PulsedBlinkingEmitter,
    "pulsed-pairs": PulsedPairs,
    "unbalanced-interferometer": UnbalancedInterferometer,
    "two-photon-interference": TwoPhotonInterference,
    "dip-scan": DipScan,
}
