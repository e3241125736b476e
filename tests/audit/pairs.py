"""Two rooms for a rule: one just inside what it asks for, and one just outside."""

from __future__ import annotations

from dataclasses import dataclass

from service.audit.inputs import RoomValues


@dataclass(frozen=True)
class Pair:
    """A room that a rule has nothing to say of, and one that breaks it."""

    rule: str
    inside: RoomValues
    outside: RoomValues
    severity: str
    gas: str | None = None

    @property
    def name(self) -> str:
        """What the pair is called in a list of tests."""
        return self.rule if self.gas is None else f"{self.rule}-{self.gas}"
