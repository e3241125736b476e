"""``rimeward migrate``: bring the database to this release, and stop."""

from argparse import ArgumentParser, Namespace

from service.settings import Settings


def add_arguments(parser: ArgumentParser) -> None:
    """Declare no arguments: the database is a setting."""


def run(_arguments: Namespace, settings: Settings) -> int:
    """Migrate the tables, then write what comes with this release."""
    from service.cli.preparing import prepared
    from service.store.engine import Database
    from service.store.migrate import upgrade

    upgrade(settings.database_url)
    with Database(settings.database_url) as database:
        prepared(database, settings)
    print("The database is of this release.")
    return 0
