"""``rimeward key``: make, list and revoke keys."""

from argparse import ArgumentParser, ArgumentTypeError, Namespace
from datetime import datetime
from functools import partial
from typing import TYPE_CHECKING, Any

from service.clock import moment_of, text_of
from service.settings import Settings

if TYPE_CHECKING:
    from service.store.keys import Key
    from service.store.session import WriteSession

ROLES = ("reader", "recorder", "auditor", "administrator")


def add_arguments(parser: ArgumentParser) -> None:
    """Declare what can be done with keys."""
    actions = parser.add_subparsers(dest="action", metavar="action", required=True)
    actions.add_parser("list", help="list the keys, those that ended too")
    create = actions.add_parser("create", help="make a key and print it, this once")
    create.add_argument("--holder", required=True, help="the person or system that has it")
    create.add_argument("--role", required=True, choices=ROLES)
    create.add_argument(
        "--site", action="append", metavar="SITE", help="a site by tag or id; again for more"
    )
    create.add_argument("--expires", type=_moment, metavar="MOMENT", help="2027-03-01T08:00:00Z")
    revoke = actions.add_parser("revoke", help="end a key at once")
    revoke.add_argument("key", help="its id, or the 8 characters after rw_")


def run(arguments: Namespace, settings: Settings) -> int:
    """Do one of them."""
    return {"list": _list, "create": _create, "revoke": _revoke}[arguments.action](
        arguments, settings
    )


def _moment(text: str) -> datetime:
    try:
        return moment_of(text)
    except ValueError as error:
        raise ArgumentTypeError(str(error)) from None


def _list(_arguments: Namespace, settings: Settings) -> int:
    from service.cli.opened import opened
    from service.store.keys import list_keys
    from service.store.scope import EVERYTHING

    with opened(settings) as database:
        for key in database.read(partial(list_keys, EVERYTHING)):
            print(_line(key))
    return 0


def _line(key: "Key") -> str:
    sites = "every site" if key.sites is None else f"{len(key.sites)} sites"
    ended = "" if key.revoked_at is None else f"  revoked {text_of(key.revoked_at)}"
    expires = "" if key.expires_at is None else f"  expires {text_of(key.expires_at)}"
    return f"{key.id}  rw_{key.prefix}  {key.role}  {sites}  {key.holder}{expires}{ended}"


def _create(arguments: Namespace, settings: Settings) -> int:
    from service.cli.opened import BY_COMMAND, opened_to_write

    with opened_to_write(settings) as writer:
        key, text = writer.run_now(partial(_made, arguments=arguments), BY_COMMAND)
    print(f"{key.role} for {key.holder}, shown this once:\n{text}")
    return 0


def _made(session: "WriteSession", arguments: Namespace) -> "tuple[Key, str]":
    from service.changes.keys import create_key

    sites = None
    if arguments.site:
        sites = frozenset(_site_id(session, named) for named in arguments.site)
    return create_key(
        session,
        holder=arguments.holder,
        role=arguments.role,
        sites=sites,
        expires_at=arguments.expires,
    )


def _site_id(session: "WriteSession", named: str) -> str:
    from service.errors import RecordNotFound
    from service.store.live import get_record, record_by_tag

    found = record_by_tag(session.scope, session.connection, "site", None, named) or get_record(
        session.scope, session.connection, "site", named
    )
    if found is None:
        raise RecordNotFound(f"There is no site {named!r}.")
    return found.id


def _revoke(arguments: Namespace, settings: Settings) -> int:
    from service.cli.opened import BY_COMMAND, opened_to_write

    with opened_to_write(settings) as writer:
        key: Any = writer.run_now(partial(_ended, named=arguments.key), BY_COMMAND)
    print(f"The key rw_{key.prefix} of {key.holder} is revoked.")
    return 0


def _ended(session: "WriteSession", named: str) -> "Key":
    from service.changes.keys import revoke_key
    from service.errors import RecordNotFound
    from service.store.keys import list_keys

    keys = list_keys(session.scope, session.connection)
    found = next((key for key in keys if named in (key.id, key.prefix)), None)
    if found is None:
        raise RecordNotFound("There is no such key.")
    return revoke_key(session, found.id)
