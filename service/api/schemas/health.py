"""The schemas of what is told of the process itself."""

from __future__ import annotations

from typing import Literal

from service.api.schemas.record import Answer


class AliveRead(Answer):
    """The process lives."""

    status: Literal["alive"]


class CheckRead(Answer):
    """One thing that was looked at."""

    status: Literal["ok", "failed"]
    detail: str


class ReadyRead(Answer):
    """Whether requests can be served."""

    status: Literal["ready", "not-ready"]
    checks: dict[str, CheckRead]
    method_version: str
    database: str
    sqlite_version: str | None
