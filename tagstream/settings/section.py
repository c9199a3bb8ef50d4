"""The base of every section: unknown keys are errors, values do not change once read."""

from __future__ import annotations

from pydantic import BaseModel, ConfigDict


class Section(BaseModel):
    """One table of the settings file. Attributes carry units, aliases are the keys."""

    model_config = ConfigDict(extra="forbid", frozen=True, arbitrary_types_allowed=True)

    @classmethod
    def keys(cls) -> list[str]:
        """The keys that this table may have."""
        return [field.alias or name for name, field in cls.model_fields.items()]
