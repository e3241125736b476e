"""The methods that results name and the rules that findings come from, in words."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict
from functools import cache
from hashlib import sha256
from typing import Annotated, Any, Final

from fastapi import APIRouter, Path, Request
from starlette.responses import Response

from service.api.access import READ, allowed
from service.api.conditional import EntityTag
from service.api.conditional import not_modified as has_it_already
from service.api.deps import JSON
from service.api.rendering import FRESH
from service.api.routes.declared import READING, answering, not_modified
from service.api.schemas.methods import MethodRead, MethodsRead, RuleRead, RulesRead
from service.audit.assessment import METHOD_VERSION
from service.audit.rules.described import described_rules
from service.changes.answers import rendered
from service.changes.cautions import CAUTIONS
from service.errors import RecordNotFound
from service.physics.sources import METHODS, SOURCES

router = APIRouter(prefix="/v1", tags=["Methods"])

Family = Annotated[str, Path(max_length=100, description="What stands before the stroke.")]
Name = Annotated[str, Path(max_length=100, description="What stands behind the stroke.")]

_READS: Final = [allowed(READ)]


@router.get(
    "/methods",
    dependencies=_READS,
    operation_id="listMethods",
    response_model=None,
    responses=answering(MethodsRead, READING, "ETag") | not_modified(),
)
async def list_methods(request: Request) -> Response:
    """List every method: words, formula, sources, where it holds, and where it is a bound."""
    return _answer(request, _all(_methods()))


@router.get(
    "/methods/{family}/{name}",
    dependencies=_READS,
    operation_id="getMethod",
    response_model=None,
    responses=answering(MethodRead, READING, "ETag") | not_modified(),
)
async def get_method(family: Family, name: Name, request: Request) -> Response:
    """Read a method."""
    return _answer(request, _one(_methods(), "method", family, name))


@router.get(
    "/rules",
    dependencies=_READS,
    operation_id="listRules",
    response_model=None,
    responses=answering(RulesRead, READING, "ETag") | not_modified(),
)
async def list_rules(request: Request) -> Response:
    """List every rule: what it looks for, how bad that is, by which method, from which source."""
    return _answer(request, _all(_rules()))


@router.get(
    "/rules/{family}/{name}",
    dependencies=_READS,
    operation_id="getRule",
    response_model=None,
    responses=answering(RuleRead, READING, "ETag") | not_modified(),
)
async def get_rule(family: Family, name: Name, request: Request) -> Response:
    """Read a rule."""
    return _answer(request, _one(_rules(), "rule", family, name))


@cache
def _methods() -> Mapping[str, dict[str, Any]]:
    return {
        slug: {
            "slug": slug,
            "words": method.words,
            "formula": method.formula,
            "range": method.range,
            "bound": method.bound,
            "section": method.letter,
            "sources": [
                {
                    "key": SOURCES[key].key,
                    "title": SOURCES[key].title,
                    "status": SOURCES[key].status,
                }
                for key in method.source_keys
            ],
        }
        for slug, method in sorted(METHODS.items())
    }


@cache
def _rules() -> Mapping[str, dict[str, Any]]:
    return {
        rule.slug: asdict(rule) | {"method_path": f"/v1/methods/{rule.method}"}
        for rule in described_rules()
    }


def _all(items: Mapping[str, dict[str, Any]]) -> bytes:
    return rendered(
        {
            "method_version": METHOD_VERSION,
            "items": list(items.values()),
            "next": None,
            "cautions": CAUTIONS,
        }
    )


def _one(items: Mapping[str, dict[str, Any]], kind: str, family: str, name: str) -> bytes:
    found = items.get(f"{family}/{name}")
    if found is None:
        raise RecordNotFound.of(kind)
    return rendered(found)


def _answer(request: Request, body: bytes) -> Response:
    # The version as well: a method may change in its numbers and not in its words.
    told = METHOD_VERSION.encode() + b"\n" + body
    tag = str(EntityTag(sha256(told).hexdigest()[:32]))
    headers = {**FRESH, "ETag": tag}
    if has_it_already(request.headers.get("if-none-match"), tag):
        return Response(status_code=304, headers=headers)
    return Response(body, 200, headers, JSON)
