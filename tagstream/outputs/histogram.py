"""The histogram of a tally as NXdata, for a span or for one value of a key."""

from __future__ import annotations

import h5py
import numpy as np

from tagstream.outputs import Arrays
from tagstream.outputs.nodes import TEXT, put
from tagstream.settings.measures import DEFAULT_LEVEL
from tagstream.units import PS_PER_S


def write_histogram(group: h5py.Group, first: h5py.Group, arrays: Arrays) -> None:
    """Arrays of a tally as in `SpanView`. first: the group whose axes all others share."""
    for name, values in arrays.items():
        if name in ("lag", "lag_edges") and group != first:
            group[name] = first[name]  # a hard link
        else:
            bins = arrays["counts"].size
            full = np.broadcast_to(values, bins) if name == "pair_time_ps" else values
            put(group, name, full)
    put(group, "live_time_s", int(arrays["live_time_ps"]) / PS_PER_S)
    group["counts"].attrs["long_name"] = "pairs"
    for name in ("g2", "g2_errors", "g2_lower", "g2_upper"):
        group[name].attrs["units"] = "1"
    group["g2_lower"].attrs["level"] = group["g2_upper"].attrs["level"] = DEFAULT_LEVEL
    group.attrs["signal"] = "g2"
    group.attrs["auxiliary_signals"] = np.array(["counts"], dtype=TEXT)
    group.attrs["axes"] = np.array(["lag"], dtype=TEXT)
    group.attrs["lag_indices"] = 0
