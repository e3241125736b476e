"""The paths of every kind of record: list, create, read, change, remove, and by external id."""

from collections.abc import Mapping
from datetime import datetime
from typing import Annotated, Any, Final

from fastapi import APIRouter, Depends, Path, Query, Request
from pydantic import create_model
from sqlalchemy import Connection
from starlette.responses import Response

from service.api.access import READ, allowed, operation_to_write
from service.api.body import body_of, sent_body
from service.api.conditional import not_modified as has_it_already
from service.api.conditional import record_tag
from service.api.deps import JSON, AsOf, Reader, Writing
from service.api.fields import ExternalId, Patch, Tag, is_record_id, read_as
from service.api.lists import Asking, Listing
from service.api.rendering import (
    FRESH,
    document_at,
    document_of,
    removed_answer,
    written_answer,
)
from service.api.resources import RESOURCES, Resource
from service.api.routes.declared import (
    LISTING,
    READING,
    READING_PAST,
    WRITING,
    answering,
    not_modified,
)
from service.api.schemas.record import Page, RecordCreate, Removed
from service.changes.answers import rendered
from service.changes.records import (
    Written,
    change_record,
    create_record,
    put_record,
    remove_record,
)
from service.errors import AsOfTooEarly, FieldsRefused, RecordNotFound, RevisionMoved
from service.store.heads import INSTALLATION, position_at
from service.store.history import record_at, version_of
from service.store.live import count_records, get_record, list_records, record_by_tag
from service.store.records import Record
from service.store.scope import Scope
from service.store.session import WriteSession

RecordIdInPath = Annotated[str, Path(description="The id of the record.")]
ExternalIdInPath = Annotated[ExternalId, Path(description="Its id in another system.")]
USUAL_SORT: Final = "id"


def record_router(resource: Resource) -> APIRouter:
    """Make the paths of one kind of record."""
    router = APIRouter(prefix=f"/v1/{resource.path}", tags=[resource.many])
    _add_reading(router, resource)
    _add_writing(router, resource)
    return router


def _add_reading(router: APIRouter, resource: Resource) -> None:
    kind, words = resource.kind, resource.words
    asking = Asking(resource.filters, resource.sorts, USUAL_SORT)
    page = create_model(
        f"{resource.one}Page",
        __base__=Page,
        __doc__=f"A page of {words} records.",
        items=(list[resource.read], ...),  # type: ignore[name-defined]
    )

    async def list_(listing: Annotated[Listing, Depends(asking)], read: Reader) -> Response:
        items, keys, total = await read(_listed, kind, listing)
        return listing.page(items, keys, total)

    async def get_by_external_id(
        external_id: ExternalIdInPath,
        request: Request,
        read: Reader,
        site_id: Annotated[str | None, Query(description="The id of its site.")] = None,
        site: Annotated[Tag | None, Query(description="The tag of its site.")] = None,
    ) -> Response:
        document = await read(_found_by_external_id, kind, external_id, site_id, site)
        return _record_answer(request, kind, document)

    async def get(
        record_id: RecordIdInPath, request: Request, as_of: AsOf, read: Reader
    ) -> Response:
        if as_of is not None:
            return _record_answer(request, kind, await read(_found_at, kind, record_id, as_of))
        return _record_answer(request, kind, await read(_found, kind, record_id))

    router.add_api_route(
        "",
        list_,
        methods=["GET"],
        dependencies=[allowed(READ)],
        operation_id=f"list{resource.many}",
        summary=f"List {words} records",
        description=f"The {words} records that this key reaches, by pages. "
        "`label.<name>=<value>` asks for a label; an empty value for what has none.",
        response_model=None,
        responses=answering(page, LISTING, "Link"),
    )
    router.add_api_route(
        "/by-external-id/{external_id:path}",
        get_by_external_id,
        methods=["GET"],
        dependencies=[allowed(READ)],
        operation_id=f"get{resource.one}ByExternalId",
        summary=f"Read a {words} by its external id",
        description="Say the site where more than one has it.",
        response_model=None,
        responses=answering(resource.read, READING, "ETag") | not_modified(),
    )
    router.add_api_route(
        "/{record_id}",
        get,
        methods=["GET"],
        dependencies=[allowed(READ)],
        operation_id=f"get{resource.one}",
        summary=f"Read a {words}",
        description=f"The {words} as it is, or as it was at a moment.",
        response_model=None,
        responses=answering(resource.read, READING_PAST, "ETag") | not_modified(),
    )


def _add_writing(router: APIRouter, resource: Resource) -> None:
    kind, words = resource.kind, resource.words
    may_write = [allowed(operation_to_write(kind))]
    written = answering(resource.written, WRITING, "ETag")
    created = answering(resource.written, WRITING, "ETag", "Location", status=201)

    async def create(
        body: Annotated[RecordCreate, body_of(resource.create)], request: Request, write: Writing
    ) -> Response:
        answer = _written_with(request, resource.create)
        return await write(create_record, kind, body.changes(), answer=answer)

    async def put_by_external_id(
        external_id: ExternalIdInPath,
        body: Annotated[RecordCreate, body_of(resource.create)],
        request: Request,
        write: Writing,
    ) -> Response:
        fields = _with_external_id(body.changes(), external_id)
        if_match = write.headers.if_match
        answer = _written_with(request, resource.create)
        return await write(_put, kind, external_id, fields, if_match, answer=answer)

    async def patch(
        record_id: RecordIdInPath,
        body: Annotated[Patch, body_of(resource.patch)],
        request: Request,
        write: Writing,
    ) -> Response:
        if_match = write.headers.if_match
        answer = _written_with(request, resource.patch)
        return await write(_change, kind, record_id, body.changes(), if_match, answer=answer)

    async def delete(record_id: RecordIdInPath, write: Writing) -> Response:
        if_match = write.headers.if_match
        return await write(_remove, kind, record_id, if_match, answer=removed_answer)

    router.add_api_route(
        "",
        create,
        methods=["POST"],
        dependencies=may_write,
        operation_id=f"create{resource.one}",
        summary=f"Create a {words}",
        description=f"Create a {words}. The answer says what that did to each room it touches.",
        status_code=201,
        response_model=None,
        responses=created,
    )
    router.add_api_route(
        "/by-external-id/{external_id:path}",
        put_by_external_id,
        methods=["PUT"],
        dependencies=may_write,
        operation_id=f"put{resource.one}ByExternalId",
        summary=f"Create a {words}, or change the one with this external id",
        description="What is not sent stays as it is. 201 where it is new, else 200.",
        response_model=None,
        responses=written | created,
    )
    router.add_api_route(
        "/{record_id}",
        patch,
        methods=["PATCH"],
        dependencies=may_write,
        operation_id=f"patch{resource.one}",
        summary=f"Change a {words}",
        description="A merge patch (RFC 7396): null takes a value away, a list is replaced whole. "
        "The answer says what that did to each room it touches.",
        response_model=None,
        responses=written,
    )
    router.add_api_route(
        "/{record_id}",
        delete,
        methods=["DELETE"],
        dependencies=may_write,
        operation_id=f"delete{resource.one}",
        summary=f"Remove a {words}",
        description="Refused while other records refer to it. The answer says what that did.",
        response_model=None,
        responses=answering(Removed, WRITING),
    )


def _written_with(request: Request, model: type[Any]) -> Any:
    readings = read_as(sent_body(request).value, model)

    def answer(session: WriteSession, written: Written) -> Any:
        return written_answer(session, written, readings)

    return answer


def _with_external_id(fields: dict[str, Any], external_id: str) -> dict[str, Any]:
    if fields.get("external_id", external_id) != external_id:
        raise FieldsRefused.at("/external_id", "not-as-in-path", "The path says another one.")
    return {name: value for name, value in fields.items() if name != "external_id"}


def _record_answer(request: Request, kind: str, document: dict[str, Any]) -> Response:
    tag = record_tag(document["revision"])
    headers = {**FRESH, "ETag": tag}
    # What counts of a basis can change with the basis that it is a copy of.
    is_whole = kind != "basis" or document["derived_from_id"] is None
    if is_whole and has_it_already(request.headers.get("if-none-match"), tag):
        return Response(status_code=304, headers=headers)
    return Response(rendered(document), 200, headers, JSON)


# What runs on a snapshot.


def _listed(
    scope: Scope, connection: Connection, kind: str, listing: Listing
) -> tuple[list[dict[str, Any]], list[tuple[Any, str]], int | None]:
    records = list_records(
        scope,
        connection,
        kind,
        listing.filters,
        sort=listing.sort,
        descending=listing.descending,
        after=listing.after,
        limit=listing.limit + 1,
    )
    items = [document_of(scope, connection, record) for record in records]
    keys = [(item[listing.sort], item["id"]) for item in items]
    total = count_records(scope, connection, kind, listing.filters) if listing.total else None
    return items, keys, total


def _found(scope: Scope, connection: Connection, kind: str, record_id: str) -> dict[str, Any]:
    record = get_record(scope, connection, kind, record_id) if is_record_id(record_id) else None
    if record is None:
        raise RecordNotFound.of(kind)
    return document_of(scope, connection, record)


def _found_at(
    scope: Scope, connection: Connection, kind: str, record_id: str, moment: datetime
) -> dict[str, Any]:
    position = position_of(scope, connection, kind, record_id, moment)
    record = record_at(scope, connection, kind, record_id, position)
    if record is None:
        raise RecordNotFound.of(kind)
    return document_at(scope, connection, record, moment)


def position_of(
    scope: Scope, connection: Connection, kind: str, record_id: str, moment: datetime
) -> int:
    """Give the position that the history of a record's site had at a moment.

    Raises
    ------
    RecordNotFound
        There never was such a record, for this key.
    AsOfTooEarly
        Nothing was recorded of its site by then.
    """
    # A record that is gone is found by its first revision, which every record has.
    first = version_of(scope, connection, kind, record_id, 1) if is_record_id(record_id) else None
    if first is None:
        raise RecordNotFound.of(kind)
    position = position_at(scope, connection, first.site_id or INSTALLATION, moment)
    if position == 0:
        raise AsOfTooEarly
    return position


def _found_by_external_id(
    scope: Scope,
    connection: Connection,
    kind: str,
    external_id: str,
    site_id: str | None,
    site: str | None,
) -> dict[str, Any]:
    filters: dict[str, Any] = {"external_id": external_id}
    if site is not None and kind != "site":
        named = record_by_tag(scope, connection, "site", None, site)
        if named is None or site_id not in (None, named.id):
            raise RecordNotFound.of(kind)
        site_id = named.id
    if site_id is not None:
        filters["site_id"] = site_id
    found = list_records(
        scope, connection, kind, filters, sort="id", descending=False, after=None, limit=2
    )
    if not found:
        raise RecordNotFound.of(kind)
    if len(found) > 1:
        detail = "More than one site has it; say which."
        raise FieldsRefused.parameter("site_id", "required", detail)
    return document_of(scope, connection, found[0])


# What runs in the writer.


def revision_wanted(present: Record, if_match: frozenset[int] | None) -> int | None:
    """Give the revision to insist on, of those that the caller takes.

    Raises
    ------
    RevisionMoved
        The record is at none of them.
    """
    if if_match is None:
        return None
    if present.revision not in if_match:
        raise RevisionMoved(present.revision)
    return present.revision


def _present(session: WriteSession, kind: str, record_id: str) -> Record:
    record = None
    if is_record_id(record_id):
        record = get_record(session.scope, session.connection, kind, record_id)
    if record is None:
        raise RecordNotFound.of(kind)
    return record


def _change(
    session: WriteSession,
    kind: str,
    record_id: str,
    changes: Mapping[str, Any],
    if_match: frozenset[int] | None,
) -> Written:
    revision = revision_wanted(_present(session, kind, record_id), if_match)
    return change_record(session, kind, record_id, changes, if_revision=revision)


def _remove(
    session: WriteSession, kind: str, record_id: str, if_match: frozenset[int] | None
) -> Written:
    revision = revision_wanted(_present(session, kind, record_id), if_match)
    return remove_record(session, kind, record_id, if_revision=revision)


def _put(
    session: WriteSession,
    kind: str,
    external_id: str,
    fields: Mapping[str, Any],
    if_match: frozenset[int] | None,
) -> Written:
    revision = None if if_match is None else max(if_match, default=0)
    return put_record(session, kind, external_id, fields, if_revision=revision)


def record_routers() -> list[APIRouter]:
    """Make the paths of all kinds."""
    return [record_router(resource) for resource in RESOURCES.values()]
