"""Who may do what: the table of roles, and the one function that every route declares.

A route without a declared operation stops the application from being made: what nobody thought
about is refused, not open.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Final

from fastapi import Depends, Request
from fastapi.params import Depends as Dependency
from fastapi.routing import APIRoute, iter_route_contexts
from starlette.routing import BaseRoute

from service.api.keyring import key_text
from service.api.service import service_of
from service.errors import FieldsRefused, NotAllowed
from service.store.scope import Scope

READER: Final = "reader"
RECORDER: Final = "recorder"
AUDITOR: Final = "auditor"
ADMINISTRATOR: Final = "administrator"
ROLE_NAMES: Final = (READER, RECORDER, AUDITOR, ADMINISTRATOR)

READ: Final = "read"
READ_PAST: Final = "read-past"
WRITE: Final = "write"
ACKNOWLEDGE: Final = "acknowledge"
DECIDE: Final = "decide"
WRITE_REFERENCES: Final = "write-references"
KEYS: Final = "keys"

ROLES: Final[Mapping[str, frozenset[str]]] = MappingProxyType(
    {
        # Records, status, findings; questions.
        READ: frozenset(ROLE_NAMES),
        # Journal, verification, evidence, and whatever is asked as of a moment.
        READ_PAST: frozenset({AUDITOR, ADMINISTRATOR}),
        # Records, levels, imports; proposals.
        WRITE: frozenset({RECORDER, ADMINISTRATOR}),
        ACKNOWLEDGE: frozenset({RECORDER, AUDITOR, ADMINISTRATOR}),
        # Accept, reopen, approve, checkpoint.
        DECIDE: frozenset({AUDITOR}),
        # Bases, own fluids, webhooks of a site.
        WRITE_REFERENCES: frozenset({ADMINISTRATOR}),
        # Keys; an administrator limited to sites has the keys of those sites only.
        KEYS: frozenset({ADMINISTRATOR}),
    }
)
"""The operations and the roles that may do them; what is not here nobody may do."""

LABEL: Final = "label."
LONGEST_PARAMETER: Final = 100
_REFERENCE_KINDS: Final = frozenset({"basis", "fluid"})


@dataclass(frozen=True, slots=True)
class Caller:
    """Who asks: the key, its role and the sites it reaches."""

    scope: Scope

    def may(self, operation: str) -> bool:
        """Tell whether the role of the key reaches an operation."""
        return self.scope.role in ROLES.get(operation, frozenset())

    def require(self, operation: str) -> None:
        """Refuse what the role of the key does not reach."""
        if not self.may(operation):
            raise NotAllowed(f"The role {self.scope.role} does not allow that.")


class Allowed:
    """A dependency that lets through the callers whose role reaches an operation."""

    def __init__(self, operation: str) -> None:
        if operation not in ROLES:
            raise ValueError(f"There is no operation {operation!r}.")
        self.operation = operation

    async def __call__(self, request: Request) -> Caller:
        """Find out who asks, or refuse."""
        scope = await service_of(request).keys.scope_of(key_text(request.headers))
        caller = Caller(scope)
        caller.require(self.operation)
        request.state.caller = caller
        refuse_unknown_parameters(request)
        return caller


def caller_of(request: Request) -> Caller:
    """Give who asks, as the route's operation has found out."""
    caller: Caller = request.state.caller
    return caller


def refuse_unknown_parameters(request: Request) -> None:
    """Refuse a query parameter that the route does not know, and one that is sent twice.

    A filter that was misspelt and passed over would answer with everything.
    """
    if not request.scope["query_string"]:
        return
    sent = [name for name, _ in request.query_params.multi_items()]
    known, labels = _known_parameters(request.scope["route"])
    for name in sent:
        if name not in known and not (labels and name.startswith(LABEL)):
            shown = name[:LONGEST_PARAMETER]
            raise FieldsRefused.parameter(shown, "unknown-parameter", "There is no such parameter.")
        if sent.count(name) > 1:
            raise FieldsRefused.parameter(name, "sent-twice", "Send this parameter once.")


def _known_parameters(route: APIRoute) -> tuple[frozenset[str], bool]:
    names: set[str] = set()
    waiting, labels = [route.dependant], False
    while waiting:
        dependant = waiting.pop()
        names.update(field.alias for field in dependant.query_params)
        labels = labels or getattr(dependant.call, "takes_labels", False)
        waiting.extend(dependant.dependencies)
    return frozenset(names), labels


class Open:
    """A dependency that says: this path needs no key."""

    async def __call__(self) -> None:
        """Let everybody through."""


def allowed(operation: str) -> Dependency:
    """Declare the operation of a route; each route declares one."""
    return Depends(Allowed(operation))  # type: ignore[no-any-return]


OPEN: Final[Dependency] = Depends(Open())


def operation_to_write(kind: str) -> str:
    """Name the operation of changing a kind of record."""
    return WRITE_REFERENCES if kind in _REFERENCE_KINDS else WRITE


def declared_operation(route: APIRoute) -> str | None:
    """Name the operation that a route declares; empty for an open one, null where it has none."""
    for dependency in route.dependant.dependencies:
        if isinstance(dependency.call, Allowed):
            return dependency.call.operation
        if isinstance(dependency.call, Open):
            return ""
    return None


def check_declared(routes: Iterable[BaseRoute]) -> None:
    """Refuse to go on with a route that declares no operation."""
    for context in iter_route_contexts(list(routes)):
        route = context.original_route
        if isinstance(route, APIRoute) and declared_operation(route) is None:
            raise TypeError(f"{context.path} declares neither an operation nor that it is open.")
