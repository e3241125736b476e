"""``rimeward recalculate``: compute rooms again from the records as they are."""

from argparse import ArgumentParser, Namespace
from functools import partial

from service.settings import Settings


def add_arguments(parser: ArgumentParser) -> None:
    """Declare the command's own arguments."""
    parser.add_argument("--site", metavar="ID", help="the rooms of one site only, by its id")


def run(arguments: Namespace, settings: Settings) -> int:
    """Compute all rooms, in batches that leave room for other writers."""
    from service.changes.recalculate import RECALCULATE, recalculate
    from service.cli.opened import BY_COMMAND, opened, opened_to_write
    from service.store.heads import INSTALLATION, heads_of
    from service.store.live import rooms_of_site
    from service.store.scope import EVERYTHING

    with opened(settings) as database, database.reading() as connection:
        sites = [head.site_id for head in heads_of(EVERYTHING, connection)]
        rooms = [
            room_id
            for site_id in sites
            if site_id != INSTALLATION and arguments.site in (None, site_id)
            for room_id in rooms_of_site(EVERYTHING, connection, site_id)
        ]
    done, batch = 0, settings.sweep_batch
    with opened_to_write(settings) as writer:
        for start in range(0, len(rooms), batch):
            job = partial(recalculate, room_ids=rooms[start : start + batch], operation=RECALCULATE)
            done += writer.run_now(job, BY_COMMAND)
    print(f"{done} rooms computed again.")
    return 0
