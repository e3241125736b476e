"""Whether the process lives, and whether it can serve; neither needs a key nor tells a secret."""

from __future__ import annotations

import sqlite3
from typing import Any

from fastapi import APIRouter, Request
from sqlalchemy import Connection
from sqlalchemy.exc import SQLAlchemyError
from starlette.concurrency import run_in_threadpool
from starlette.responses import Response

from service.api.access import OPEN
from service.api.deps import JSON, NOT_KEPT_BY_CACHES
from service.api.schemas.health import AliveRead, ReadyRead
from service.api.service import Service, service_of
from service.audit.assessment import METHOD_VERSION
from service.changes.answers import rendered
from service.changes.method import is_newer, method_of
from service.store.migrate import CURRENT, state_of
from service.store.urls import SQLITE

router = APIRouter(tags=["Operation"])

_READY = {
    200: {"model": ReadyRead, "description": "It can serve."},
    503: {"model": ReadyRead, "description": "It cannot, and why."},
}


@router.get(
    "/healthz",
    dependencies=[OPEN],
    operation_id="getHealth",
    response_model=None,
    responses={200: {"model": AliveRead, "description": "The process lives."}},
)
async def alive() -> Response:
    """Say that the process lives. Nothing is touched."""
    return Response(rendered({"status": "alive"}), 200, dict(NOT_KEPT_BY_CACHES), JSON)


@router.get(
    "/readyz",
    dependencies=[OPEN],
    operation_id="getReadiness",
    response_model=None,
    responses=_READY,  # type: ignore[arg-type]
)
async def ready(request: Request) -> Response:
    """Say whether requests can be served: the database, its tables, the writer, the method."""
    service = service_of(request)
    checks = await run_in_threadpool(_checks, service)
    is_ready = service.accepting and all(check["status"] == "ok" for check in checks.values())
    document: dict[str, Any] = {
        "status": "ready" if is_ready else "not-ready",
        "checks": checks,
        "method_version": METHOD_VERSION,
        "database": service.database.dialect,
        "sqlite_version": sqlite3.sqlite_version if service.database.dialect == SQLITE else None,
    }
    status = 200 if is_ready else 503
    return Response(rendered(document), status, dict(NOT_KEPT_BY_CACHES), JSON)


def _checks(service: Service) -> dict[str, dict[str, Any]]:
    try:
        schema, method = service.database.read(_schema_and_method)
    except SQLAlchemyError as error:
        # The kind of error alone: its text can hold the address of the database.
        return {"database": {"status": "failed", "detail": type(error).__name__}}
    return {
        "database": {"status": "ok", "detail": "It answers."},
        "tables": {"status": "ok" if schema == CURRENT else "failed", "detail": schema},
        "writer": {"status": "ok", "detail": f"{service.writer.waiting} waiting"},
        # A process with an older method still serves polls.
        "method": {"status": "ok", "detail": _method_detail(method)},
        "stopping": {
            "status": "ok" if service.accepting else "failed",
            "detail": "no" if service.accepting else "yes",
        },
    }


def _schema_and_method(connection: Connection) -> tuple[str, str]:
    return state_of(connection), method_of(connection)


def _method_detail(noted: str) -> str:
    if is_newer(noted, METHOD_VERSION):
        return f"The database has method {noted}; this process only reads."
    return f"It computes by method {METHOD_VERSION}."
