"""What every table of a scene file has in common."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any, Self

from pydantic import BaseModel, ConfigDict, model_validator
from pydantic_core import PydanticCustomError

Conflict = tuple[str, str]
"""A key (with its table before a dot, where that is another one) and what is wrong with it beside other keys."""


class Table(BaseModel):
    """One table of a scene file."""

    model_config = ConfigDict(frozen=True, strict=True, extra="forbid", allow_inf_nan=False, validate_default=False)

    @classmethod
    def conflicts(cls, values: Mapping[str, Any]) -> Iterator[Conflict]:
        """Yield what is wrong between keys that are each right by themselves.

        Parameters
        ----------
        values : mapping
            Value by key, defaults included; keys with a fault of their own are absent.

        Yields
        ------
        tuple of str
            Key and message.
        """
        yield from ()

    @model_validator(mode="after")
    def _agree(self) -> Self:
        found = list(self.conflicts(dict(self)))
        if found:
            raise PydanticCustomError("conflicts", "keys that do not go together", {"conflicts": found})
        return self


def one_turn(angle_deg: float) -> float:
    """Bring an angle into [0, 360) degrees."""
    angle_deg = angle_deg % 360.0
    return angle_deg if angle_deg < 360.0 else 0.0


def distinct(entries: tuple[Any, ...]) -> tuple[Any, ...]:
    """Refuse a list that holds an entry twice."""
    twice = next((entry for place, entry in enumerate(entries) if entry in entries[:place]), None)
    if twice is not None:
        raise PydanticCustomError("words", f"must be a list of distinct entries, got {twice:.12g} twice")
    return entries
