"""The schemas of methods and rules."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from service.api.schemas.record import Answer


class SourceRead(Answer):
    """A work that a formula or a value comes from."""

    key: str
    title: str
    status: str = Field(description="seen, or from memory: not read for this service.")


class MethodRead(Answer):
    """A method that results name."""

    slug: str
    words: str
    formula: str
    range: str = Field(description="Where it holds.")
    bound: bool = Field(description="A bound on the safe side, and not a best estimate.")
    section: str = Field(description="Letter of the section of the methods paper.")
    sources: list[SourceRead]


class MethodsRead(Answer):
    """Every method of the version that runs."""

    method_version: str
    items: list[MethodRead]
    next: None = Field(default=None, description="There is one page.")
    cautions: str


class RuleRead(Answer):
    """What is looked for, and how bad it is where it is found."""

    slug: str
    family: str
    looks_for: str
    subject: str = Field(description="The table that is judged row by row.")
    worse_is: Literal["lower", "higher"]
    gases: list[str] = Field(description="The gases judged; none where it is about no gas.")
    severity: str
    method: str
    method_path: str = Field(description="Where the method is told.")
    sources: list[str]


class RulesRead(Answer):
    """Every rule of the version that runs."""

    method_version: str
    items: list[RuleRead]
    next: None = Field(default=None, description="There is one page.")
    cautions: str
