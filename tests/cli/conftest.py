"""The verbs are tested on the same settings and recordings as the flow."""

from tests.flow.conftest import recording, settings, tagstream

__all__ = ["recording", "settings", "tagstream"]
