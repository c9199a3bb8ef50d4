"""Settings: one TOML file to checked, frozen values; every problem is reported at once.

Shared by all stages. It knows the keys and what must hold between them, and nothing of numba,
HDF5 or what the stages do with the values.
"""

from tagstream.settings.load import load_settings
from tagstream.settings.sections import Channel, Conditioning, Rolling, Settings

__all__ = ["Channel", "Conditioning", "Rolling", "Settings", "load_settings"]
