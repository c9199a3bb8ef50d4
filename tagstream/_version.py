"""The one place of the version."""

__version__ = "0.2.0"
