"""What the routes work with: the database, the writer, the clock, what is held in memory."""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import timedelta

from fastapi import FastAPI, Request
from starlette.types import Scope

from service.api.kept import KeptBodies
from service.api.keyring import KeyRing
from service.api.questions import Questions
from service.clock import Clock
from service.store.engine import Database
from service.store.memory import StatusMemory
from service.store.writer import Writer


@dataclass(slots=True)
class Service:
    """One running service; the application holds it from its start to its end."""

    database: Database
    clock: Clock
    memory: StatusMemory
    writer: Writer
    keys: KeyRing
    cursor_secret: bytes
    idempotency_for: timedelta
    accepting: bool = True
    """False from the moment the service begins to stop, so that nobody sends more."""
    in_flight: set[tuple[str, str, str]] = field(default_factory=set)
    """Requests with an Idempotency-Key that run now: key, path and token."""
    questions: Questions = field(default_factory=Questions)
    summaries: KeptBodies = field(default_factory=KeptBodies)


def service_of(request: Request) -> Service:
    """Give the service that answers a request."""
    service: Service = request.app.state.service
    return service


def running_service(scope: Scope) -> Service | None:
    """Give the service behind an ASGI scope, if it has started."""
    app = scope.get("app")
    service = getattr(app.state, "service", None) if isinstance(app, FastAPI) else None
    return service if isinstance(service, Service) else None
