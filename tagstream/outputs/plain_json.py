"""JSON that any program reads: finite numbers only."""

from __future__ import annotations

import json
from collections.abc import Mapping
from math import isfinite
from typing import Any

import numpy as np


def finite(value: Any) -> Any:
    """Plain values all the way down; not-a-numbers and infinities become None."""
    if isinstance(value, Mapping):
        return {str(key): finite(inner) for key, inner in value.items()}
    if isinstance(value, list | tuple):
        return [finite(inner) for inner in value]
    if isinstance(value, np.ndarray | np.generic):
        return finite(value.tolist())
    if isinstance(value, float) and not isfinite(value):
        return None
    return value


def as_bytes(value: Any) -> bytes:
    """JSON text in UTF-8 of plain values. Raises TypeError for others."""
    return json.dumps(finite(value), ensure_ascii=False, allow_nan=False).encode(errors="replace")
