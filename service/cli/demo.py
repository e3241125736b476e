"""``rimeward demo``: load the invented estate, or take it away."""

from argparse import ArgumentParser, Namespace

from service.settings import Settings


def add_arguments(parser: ArgumentParser) -> None:
    """Declare the command's own arguments."""
    parser.add_argument("--remove", action="store_true", help="remove every demo site")


def run(arguments: Namespace, settings: Settings) -> int:
    """Load or remove, in one transaction."""
    from service.changes.demo import load_demo, remove_demo
    from service.changes.shipped import ship
    from service.cli.opened import BY_COMMAND, opened_to_write

    with opened_to_write(settings) as writer:
        if arguments.remove:
            print(f"{writer.run_now(remove_demo, BY_COMMAND)} records removed.")
        else:
            writer.run_now(ship, BY_COMMAND)
            print(f"{writer.run_now(load_demo, BY_COMMAND)} records of an invented estate loaded.")
    return 0
