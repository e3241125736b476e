"""``rimeward serve``: bring the database to this release, and serve the API."""

import logging
import signal
import socket
import sys
from argparse import ArgumentParser, ArgumentTypeError, Namespace
from dataclasses import replace
from types import FrameType
from typing import TYPE_CHECKING

from service.settings import Settings, SettingsError

if TYPE_CHECKING:
    from uvicorn import Config

    from service.app import Application
    from service.store.engine import Database

# How long an idle connection is kept: longer than pollers pause, so that they need no new one.
KEEP_ALIVE_S = 75
STOPS_WITHIN_S = 10
WAITING_CONNECTIONS = 2048
LARGEST_PORT = 65535


def add_arguments(parser: ArgumentParser) -> None:
    """Declare the command's own arguments, which go before the settings."""
    parser.add_argument("--host", help="the address to serve on")
    parser.add_argument("--port", type=_port, help="the port to serve on; 0: any that is free")
    parser.add_argument(
        "--no-demo", action="store_true", help="leave a new database without the demo estate"
    )


def run(arguments: Namespace, settings: Settings) -> int:
    """Serve until told to stop."""
    chosen = _chosen(arguments, settings)
    chosen.check_address()
    logging.basicConfig(
        level=chosen.log_level.upper(), format="%(asctime)s %(levelname)s %(name)s: %(message)s"
    )
    logging.getLogger("alembic").setLevel(logging.WARNING)
    # The server raises the signal that stopped it once more at its end, when the database is still
    # to be closed.
    signal.signal(signal.SIGTERM, _leave)
    with listening(chosen.host, chosen.port) as listener:
        return _serve(chosen, listener)


def _leave(_signal: int, _frame: FrameType | None) -> None:
    raise SystemExit(0)


def _port(text: str) -> int:
    if not text.isascii() or not text.isdigit() or int(text[:6]) > LARGEST_PORT:
        raise ArgumentTypeError(f"a port is a number from 0 to {LARGEST_PORT}")
    return int(text)


def _chosen(arguments: Namespace, settings: Settings) -> Settings:
    given = {name: getattr(arguments, name) for name in ("host", "port")}
    changed = {name: value for name, value in given.items() if value is not None}
    if arguments.no_demo:
        changed["demo"] = False
    return replace(settings, **changed)


def listening(host: str, port: int) -> socket.socket:
    """Take the port before anything is migrated; refuse with a sentence where it is taken."""
    try:
        kind, *_, address = socket.getaddrinfo(
            host, port, type=socket.SOCK_STREAM, flags=socket.AI_PASSIVE
        )[0]
    except OSError as error:
        raise SettingsError(f"There is no address {host}: {error.strerror}.") from None
    listener = socket.socket(kind, socket.SOCK_STREAM)
    listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
    try:
        listener.bind(address)
        listener.listen(WAITING_CONNECTIONS)
    except OSError as error:
        listener.close()
        raise SettingsError(
            f"Port {port} of {host} cannot be taken: {error.strerror}. "
            "Choose another with --port or RIMEWARD_PORT."
        ) from None
    return listener


def _serve(settings: Settings, listener: socket.socket) -> int:
    from service.app import create_app
    from service.cli.preparing import prepared
    from service.store.engine import Database
    from service.store.migrate import EMPTY, schema_state, upgrade

    is_new = schema_state(settings.database_url) == EMPTY
    upgrade(settings.database_url)
    with Database(settings.database_url) as database:
        prepared(database, settings, demo=is_new and settings.demo, keys=True)
        _load_properties(database)
        return _run_server(create_app(settings, database=database), settings, listener)


def _load_properties(database: "Database") -> None:
    """Load the property library, where a record needs it, before anybody has to wait for it.

    It takes seconds, in which the whole process stands still.
    """
    from service.physics.properties import critical_point
    from service.store.live import count_records
    from service.store.scope import EVERYTHING

    with database.reading() as connection:
        cylinders = count_records(EVERYTHING, connection, "vessel", {"kind": "cylinder"})
        lines = count_records(EVERYTHING, connection, "supply-line", {})
    if cylinders or lines:
        critical_point("nitrogen")


def _run_server(app: "Application", settings: Settings, listener: socket.socket) -> int:
    from service.cli.server import AnnouncingServer

    host, port = listener.getsockname()[:2]
    scheme = "http" if settings.tls_cert is None else "https"
    named = f"[{host}]" if ":" in host else host
    server = AnnouncingServer(_config(app, settings), app, f"{scheme}://{named}:{port}")
    server.run(sockets=[listener])
    return 0 if server.started else 1


def _config(app: "Application", settings: Settings) -> "Config":
    from uvicorn import Config

    from service.api.protocol import deadline_protocol

    return Config(
        app,
        loop="asyncio" if sys.platform == "win32" else "uvloop",
        http=deadline_protocol(settings.request_deadline),
        ws="none",
        lifespan="on",
        log_config=None,
        access_log=False,
        server_header=False,
        proxy_headers=settings.behind_proxy,
        forwarded_allow_ips="*" if settings.behind_proxy else None,
        ssl_certfile=settings.tls_cert,
        ssl_keyfile=settings.tls_key,
        timeout_keep_alive=KEEP_ALIVE_S,
        timeout_graceful_shutdown=STOPS_WITHIN_S,
    )
