"""Keys: who may ask, in which role and for which sites."""

from __future__ import annotations

from datetime import timedelta
from typing import Annotated, Any

from fastapi import APIRouter, Path
from sqlalchemy import Connection
from starlette.responses import Response

from service.api.access import KEYS, allowed
from service.api.body import body_of
from service.api.deps import JSON, NOT_KEPT_BY_CACHES, Answered, Reader, Writing
from service.api.fields import is_record_id
from service.api.routes.declared import READING, WRITING, answering
from service.api.schemas.keys import KeyCreate, KeyList, KeyMade, KeyRead, KeyRotate
from service.changes.answers import rendered
from service.changes.keys import create_key, revoke_key, rotate_key
from service.clock import moment_of, text_of
from service.errors import RecordNotFound
from service.store.keys import Key, list_keys
from service.store.scope import Scope
from service.store.session import WriteSession

router = APIRouter(prefix="/v1/keys", tags=["Keys"])

KeyId = Annotated[str, Path(description="The id of the key.")]


@router.get(
    "",
    dependencies=[allowed(KEYS)],
    operation_id="listKeys",
    response_model=None,
    responses=answering(KeyList, READING),
)
async def list_all(read: Reader) -> Response:
    """List the keys, those that ended too. Their texts are not kept."""
    items = await read(_listed)
    return Response(rendered({"items": items}), 200, dict(NOT_KEPT_BY_CACHES), JSON)


@router.post(
    "",
    status_code=201,
    dependencies=[allowed(KEYS)],
    operation_id="createKey",
    response_model=None,
    responses=answering(KeyMade, WRITING, status=201),
)
async def create(body: Annotated[KeyCreate, body_of(KeyCreate)], write: Writing) -> Response:
    """Make a key. Its text is in this answer only; a repeated request is answered 409."""
    own = write.caller.scope.sites
    sites = own if "sites" not in body.model_fields_set and own is not None else body.sites
    return await write(
        create_key,
        holder=body.holder,
        role=body.role,
        sites=None if sites is None else frozenset(sites),
        expires_at=None if body.expires_at is None else moment_of(body.expires_at),
        answer=_made,
    )


@router.post(
    "/{key_id}/revoke",
    dependencies=[allowed(KEYS)],
    operation_id="revokeKey",
    response_model=None,
    responses=answering(KeyRead, WRITING),
)
async def revoke(key_id: KeyId, write: Writing) -> Response:
    """End a key at once."""
    return await write(revoke_key, _sane(key_id), answer=_revoked)


@router.post(
    "/{key_id}/rotate",
    status_code=201,
    dependencies=[allowed(KEYS)],
    operation_id="rotateKey",
    response_model=None,
    responses=answering(KeyMade, WRITING, status=201),
)
async def rotate(
    key_id: KeyId, body: Annotated[KeyRotate, body_of(KeyRotate)], write: Writing
) -> Response:
    """Make a key that follows another one; the old one works on for a while."""
    overlap = timedelta(seconds=body.overlap_s)
    return await write(rotate_key, _sane(key_id), overlap, answer=_made)


def _sane(key_id: str) -> str:
    if not is_record_id(key_id):
        raise RecordNotFound.of("key")
    return key_id


def _listed(scope: Scope, connection: Connection) -> list[dict[str, Any]]:
    return [key_document(key) for key in list_keys(scope, connection)]


def key_document(key: Key) -> dict[str, Any]:
    """Give a key as it is answered."""
    times = {
        name: None if moment is None else text_of(moment)
        for name, moment in (
            ("created_at", key.created_at),
            ("expires_at", key.expires_at),
            ("revoked_at", key.revoked_at),
            ("last_used_at", key.last_used_at),
        )
    }
    return {
        "id": key.id,
        "prefix": key.prefix,
        "holder": key.holder,
        "role": key.role,
        "sites": None if key.sites is None else sorted(key.sites),
        **times,
        "replaced_by": key.replaced_by,
    }


def _made(_session: WriteSession, made: tuple[Key, str]) -> Answered:
    key, text = made
    body = rendered({**key_document(key), "key": text})
    return Answered(201, body, NOT_KEPT_BY_CACHES, secret=True)


def _revoked(_session: WriteSession, key: Key) -> Answered:
    return Answered(200, rendered(key_document(key)), NOT_KEPT_BY_CACHES)
