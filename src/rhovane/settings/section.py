"""What all parts of the settings have in common."""

from __future__ import annotations

from pydantic import BaseModel, ConfigDict


class Section(BaseModel):
    """A frozen part of the settings; an unknown key is a mistake, never ignored."""

    model_config = ConfigDict(extra="forbid", frozen=True, str_strip_whitespace=False)
