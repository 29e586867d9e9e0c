"""What every part of a config file shares."""

from __future__ import annotations

from typing import Annotated

from pydantic import BaseModel, ConfigDict, Field

Identifier = Annotated[str, Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9._-]{0,63}$")]
Text = Annotated[str, Field(min_length=1)]
Share = Annotated[float, Field(ge=0, le=1)]


class Part(BaseModel):
    """A frozen part of a config file; unknown fields are faults, not silently dropped."""

    model_config = ConfigDict(extra="forbid", frozen=True)
