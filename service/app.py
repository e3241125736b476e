"""The application: the routes, the layers in front of them, and what starts and stops with it."""

from __future__ import annotations

import asyncio
import contextlib
import logging
import sqlite3
from collections.abc import AsyncIterator, Callable
from contextlib import asynccontextmanager
from functools import cache, partial
from importlib.resources import files
from pathlib import Path
from typing import Any, Final

from fastapi import FastAPI
from fastapi.telemetry import TelemetryConfig
from starlette.concurrency import run_in_threadpool
from starlette.routing import BaseRoute, Mount
from starlette.staticfiles import StaticFiles
from starlette.types import ASGIApp, Receive, Scope, Send

from service.api.access import check_declared
from service.api.keyring import USE_NOTED_EVERY, KeyRing
from service.api.limits import Limits
from service.api.openapi import described
from service.api.poll import LENGTH, PollLayer, answered_outermost, send_answer
from service.api.problems import install_problem_handlers
from service.api.routes import (
    changes,
    curve,
    docs,
    findings,
    health,
    keys,
    methods,
    room_answers,
    summary,
)
from service.api.routes.declared import with_heads
from service.api.routes.records import record_routers
from service.api.service import Service
from service.audit.assessment import METHOD_VERSION
from service.changes.method import claim_method, is_newer
from service.changes.shipped import ship
from service.clock import Clock, SystemClock
from service.errors import NewerDatabase
from service.settings import Settings, SettingsError
from service.store.engine import Database
from service.store.heads import INSTALLATION, head_of, heads_of
from service.store.installation import ensure_installation
from service.store.memory import SiteHead, StatusMemory
from service.store.migrate import CURRENT, NEWER
from service.store.scope import EVERYTHING
from service.store.session import WriteSession
from service.store.urls import SQLITE
from service.store.writer import Writer
from service.work.clock import run_clock_once
from service.work.context import ITSELF
from service.work.repeat import repeat
from service.work.sweep import run_sweep_once
from service.work.upkeep import run_upkeep_once

# The version of the API, which callers see; that of the distribution is another matter.
API_VERSION: Final = "1.0"
_NO_TELEMETRY: Final[TelemetryConfig] = {"tracing": False, "metrics": False, "logs": False}
# Before this release two connections that write in the same instant can damage a file; the service
# has one only, so that this is a hint and no fault.
_SOUND_SQLITE: Final = (3, 51, 3)

_log = logging.getLogger(__name__)


class Application(FastAPI):
    """The framework's application with our layers around it and our description of it."""

    largest_body: int
    service: Service | None = None

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Answer a plain poll at once, before any layer is asked; all else goes through them."""
        if self.service is not None and scope["type"] == "http" and len(scope["path"]) == LENGTH:
            answer = await answered_outermost(self.service, scope)
            if answer is not None:
                await send_answer(send, answer)
                return
        await super().__call__(scope, receive, send)

    def build_middleware_stack(self) -> ASGIApp:
        """Put the poll layer before the framework, and the limits before both."""
        return Limits(PollLayer(super().build_middleware_stack()), self.largest_body)

    def openapi(self) -> dict[str, Any]:
        """Describe the API."""
        return description()


@cache
def description() -> dict[str, Any]:
    """Describe the API of this release; it is made once, since that takes most of a second."""
    return described(_routes(), API_VERSION)


def create_app(
    settings: Settings, *, clock: Clock | None = None, database: Database | None = None
) -> Application:
    """Make the application; nothing is opened before it starts."""
    app = Application(
        title="Rimeward",
        version=API_VERSION,
        openapi_url=None,  # A route of our own makes it off the event loop.
        docs_url=None,
        redoc_url=None,
        telemetry=_NO_TELEMETRY,
        redirect_slashes=False,
        # Handed over whole: including a router makes each of its routes a second time.
        routes=list(_routes()),
        lifespan=partial(_running, settings, clock or SystemClock(), database),
    )
    app.largest_body = settings.max_body_bytes
    install_problem_handlers(app)
    check_declared(app.routes)
    return app


@cache
def _routes() -> tuple[BaseRoute, ...]:
    """Make the routes; they hold nothing of an application, so that all of a process share them."""
    # Records by external id come before what follows an id, so that none is taken for the other.
    routers = (
        *record_routers(),
        room_answers.router,
        curve.router,
        changes.router,
        findings.router,
        summary.router,
        methods.router,
        keys.router,
        health.router,
        docs.router,
    )
    folder = Path(str(files("service"))) / "static"
    static = Mount("/static", StaticFiles(directory=folder), name="static")
    return (*with_heads(route for router in routers for route in router.routes), static)


@asynccontextmanager
async def _running(
    settings: Settings, clock: Clock, given: Database | None, app: Application
) -> AsyncIterator[None]:
    database = Database(settings.database_url) if given is None else given
    try:
        await run_in_threadpool(check_schema, database)
        service = await _started(settings, clock, database)
        app.service = app.state.service = service
        jobs = [asyncio.create_task(job) for job in _jobs(settings, service)]
        try:
            yield
        finally:
            await _stop(service, settings, jobs)
    finally:
        if given is None:
            await run_in_threadpool(database.close)


def check_schema(database: Database) -> None:
    """Refuse a database whose tables are not those of this release."""
    state = database.schema_state()
    if state == NEWER:
        raise NewerDatabase(
            "The database was made by a newer release; run that one, or restore a copy."
        )
    if state != CURRENT:
        raise SettingsError(
            "The database has no tables, or those of an older release: run 'rimeward migrate'."
        )


async def _started(settings: Settings, clock: Clock, database: Database) -> Service:
    memory = StatusMemory(settings.memory_bytes)
    writer = Writer(database, clock, memory, rooms_per_change=settings.rooms_per_change)
    try:
        secret = await writer.run(prepare, ITSELF)
        memory.tell_heads(await run_in_threadpool(database.read, _site_heads))
    except BaseException:
        await run_in_threadpool(writer.close)
        raise
    _tell_version(database)
    return Service(
        database=database,
        clock=clock,
        memory=memory,
        writer=writer,
        keys=KeyRing(database, memory, clock),
        cursor_secret=secret,
        idempotency_for=settings.idempotency_for,
    )


def prepare(session: WriteSession) -> bytes:
    """Write what a database must hold to be served: its own row, the shipped records."""
    method = claim_method(session)
    if is_newer(method, METHOD_VERSION):
        _log.warning("The database is computed by method %s; this process only reads.", method)
    else:
        ship(session)
    return ensure_installation(session).secret


def _site_heads(connection: Any) -> dict[str, SiteHead]:
    heads = list(heads_of(EVERYTHING, connection))
    installation = head_of(EVERYTHING, connection, INSTALLATION)
    if installation is not None:
        heads.append(installation)
    return {head.site_id: SiteHead(head.position, head.wanted_position) for head in heads}


def _tell_version(database: Database) -> None:
    if database.dialect == SQLITE and sqlite3.sqlite_version_info < _SOUND_SQLITE:
        _log.info(
            "SQLite %s is older than 3.51.3; with one writer, as here, that is sound.",
            sqlite3.sqlite_version,
        )


def _jobs(settings: Settings, service: Service) -> list[Any]:
    writer, database, clock = service.writer, service.database, service.clock
    wanted: list[tuple[str, Callable[[], Any], Any]] = [
        ("clock", partial(run_clock_once, writer, database, clock), settings.clock_every),
        (
            "sweep",
            partial(run_sweep_once, writer, database, settings.sweep_batch),
            settings.sweep_every,
        ),
    ]
    jobs = [repeat(name, once, every) for name, once, every in wanted if every]
    if settings.clock_every:
        jobs.append(repeat("upkeep", partial(_upkeep, settings, service), USE_NOTED_EVERY))
    return jobs


async def _upkeep(settings: Settings, service: Service) -> None:
    await run_upkeep_once(service.writer, service.keys.used(), settings.idempotency_for)


async def _stop(service: Service, settings: Settings, jobs: list[asyncio.Task[Any]]) -> None:
    """Stop in order: nobody new, no more jobs, what waits is written, then the rest is closed."""
    service.accepting = False
    for job in jobs:
        job.cancel()
    with contextlib.suppress(asyncio.CancelledError):
        await asyncio.gather(*jobs, return_exceptions=True)
    try:
        if jobs:
            await _upkeep(settings, service)
    finally:
        await run_in_threadpool(service.writer.close)
