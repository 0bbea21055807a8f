"""Base of every table of a specification: unknown keys, NaN and changes are refused."""

from pydantic import BaseModel, ConfigDict

__all__ = ["StrictPart"]


class StrictPart(BaseModel):
    """A part of a specification, frozen and closed."""

    model_config = ConfigDict(
        extra="forbid", frozen=True, allow_inf_nan=False, str_strip_whitespace=True, strict=False
    )
