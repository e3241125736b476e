"""What a migrated database is given before it is served: shipped records, demo, first keys."""

from __future__ import annotations

import logging
import os
import sys
from collections.abc import Mapping
from functools import partial
from pathlib import Path
from typing import Final

from service.app import prepare
from service.changes.demo import load_demo
from service.changes.keys import ADMINISTRATOR, create_key, ensure_admin_key, key_secret
from service.cli.opened import BY_COMMAND
from service.clock import SystemClock
from service.settings import Settings, state_folder
from service.store.engine import Database
from service.store.keys import list_keys
from service.store.memory import StatusMemory
from service.store.scope import EVERYTHING
from service.store.session import WriteSession
from service.store.urls import SQLITE, database_address, sqlite_file
from service.store.writer import Writer

FIRST_ROLES: Final = ("reader", ADMINISTRATOR)
FIRST_HOLDER: Final = "first start"

_log = logging.getLogger(__name__)


def prepared(
    database: Database, settings: Settings, *, demo: bool = False, keys: bool = False
) -> None:
    """Write what the database needs, each thing only where it is not there."""
    with Writer(
        database, SystemClock(), StatusMemory(1 << 16), settings.rooms_per_change
    ) as writer:
        writer.run_now(prepare, BY_COMMAND)
        if demo:
            number = writer.run_now(load_demo, BY_COMMAND)
            print(f"Loaded a demo estate of {number} records; 'rimeward demo --remove' drops it.")
        if keys:
            _ensure_keys(writer, database, settings)


def _ensure_keys(writer: Writer, database: Database, settings: Settings) -> None:
    """See to it that somebody can come in."""
    present = database.read(partial(list_keys, EVERYTHING))
    has_administrator = any(key.role == ADMINISTRATOR for key in present)
    if settings.admin_key is not None:
        if has_administrator:
            _log.info("RIMEWARD_ADMIN_KEY is passed over: there is an administrator's key.")
        else:
            writer.run_now(partial(ensure_admin_key, secret=settings.admin_key), BY_COMMAND)
    elif not present:
        texts = {role: key_secret() for role in FIRST_ROLES}
        # Shown before they are stored: a key that nobody has seen would lock everybody out.
        _show(texts, _file_for(settings))
        writer.run_now(partial(_create_first, texts=texts), BY_COMMAND)


def _create_first(session: WriteSession, texts: Mapping[str, str]) -> None:
    for role, text in texts.items():
        create_key(session, holder=FIRST_HOLDER, role=role, sites=None, secret=text)


def _show(texts: Mapping[str, str], file: Path) -> None:
    """Print keys to a terminal; else write them where only the owner can read them."""
    lines = "".join(f"{role}: {text}\n" for role, text in texts.items())
    if sys.stdout.isatty():
        print(f"Keys, shown this once:\n{lines}", end="")
        return
    file.parent.mkdir(parents=True, exist_ok=True)
    # Made anew, so that neither an old file's mode nor a link decides who reads it.
    file.unlink(missing_ok=True)
    descriptor = os.open(file, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    with os.fdopen(descriptor, "w", encoding="utf-8") as opened:
        opened.write(lines)
    print(f"The first keys are in {file}; keep them and remove the file.")


def _file_for(settings: Settings) -> Path:
    """Name the file for first keys: beside the database, or in the state folder."""
    address = database_address(settings.database_url)
    if address.get_backend_name() == SQLITE:
        database = sqlite_file(address)
        return database.with_name(f"{database.name}.first-keys")
    return state_folder(os.environ) / "rimeward.first-keys"
