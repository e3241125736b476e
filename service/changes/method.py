"""Which method computes: the newest that any process of the installation has.

In a rolling upgrade an older process keeps answering polls as they are stored, but neither writes
nor sweeps: else two methods would take turns at a room.
"""

from __future__ import annotations

from sqlalchemy import Connection

from service.audit.assessment import METHOD_VERSION
from service.errors import OlderMethod
from service.store.installation import (
    ensure_installation,
    installation_of,
    revise_method_version,
)
from service.store.scope import EVERYTHING
from service.store.session import WriteSession


def is_newer(one: str, other: str) -> bool:
    """Tell whether one method version comes after another; both are dotted numbers."""
    return _parts(one) > _parts(other)


def _parts(version: str) -> tuple[int, ...]:
    return tuple(int(part) for part in version.split(".") if part)


def claim_method(session: WriteSession) -> str:
    """Note the method of this process, unless a newer one was noted; give the one that counts."""
    noted = ensure_installation(session, METHOD_VERSION).method_version
    if is_newer(METHOD_VERSION, noted):
        revise_method_version(session, METHOD_VERSION)
        return METHOD_VERSION
    return noted


def method_of(connection: Connection) -> str:
    """Give the method that counts in this database."""
    installation = installation_of(EVERYTHING, connection)
    return METHOD_VERSION if installation is None else installation.method_version


def refuse_older_method(session: WriteSession) -> None:
    """Refuse to write with an older method than the database's."""
    noted = method_of(session.connection)
    if is_newer(noted, METHOD_VERSION):
        raise OlderMethod(
            f"The database is computed by method {noted}, and this process has {METHOD_VERSION}. "
            "It still answers what is stored."
        )
