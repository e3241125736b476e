"""The commands by name, and the parser that loads no more of them than it needs.

Importing the web framework and the solver takes longer than most commands run, so a command's
module is imported only once its name stands on the command line.
"""

from argparse import ArgumentParser, Namespace
from collections.abc import Sequence
from dataclasses import dataclass
from importlib import import_module
from typing import Protocol, cast

from service.settings import Settings


class CommandModule(Protocol):
    """What a module of a command offers."""

    def add_arguments(self, parser: ArgumentParser) -> None:
        """Declare the command's own arguments."""
        ...

    def run(self, arguments: Namespace, settings: Settings) -> int:
        """Do it, and return the exit status."""
        ...


@dataclass(frozen=True, slots=True)
class Command:
    """A command: its name, the module that does it, and a line of help."""

    name: str
    module: str
    help: str

    def load(self) -> CommandModule:
        """Import the module of the command."""
        return cast(CommandModule, import_module(self.module))


COMMANDS: tuple[Command, ...] = (
    Command("serve", "service.cli.serve", "migrate the database and serve the API and the board"),
    Command("migrate", "service.cli.migrate", "bring the database to this release and stop"),
    Command("demo", "service.cli.demo", "load the demo estate, or remove it"),
    Command("key", "service.cli.key", "make, list and revoke keys"),
    Command("verify", "service.cli.verify", "prove the journal and the stored assessments"),
    Command("recalculate", "service.cli.recalculate", "recalculate rooms by the running method"),
    Command("openapi", "service.cli.openapi", "print the description of the API"),
)


def parsed(argv: Sequence[str]) -> tuple[Command, Namespace]:
    """Parse a command line into the command and its arguments; leaves with 2 where it cannot."""
    parser = ArgumentParser(
        prog="rimeward",
        description="Oxygen and gas hazards of cryogen rooms, recalculated with every change.",
        epilog="Settings are read from the environment, from variables named RIMEWARD_*.",
        allow_abbrev=False,
    )
    subparsers = parser.add_subparsers(dest="command", metavar="command", required=True)
    for command in COMMANDS:
        subparser = subparsers.add_parser(
            command.name, help=command.help, description=_sentence(command.help), allow_abbrev=False
        )
        # The parser itself has no option but --help, so a command can only stand first.
        if argv and argv[0] == command.name:
            command.load().add_arguments(subparser)
    arguments = parser.parse_args(argv)
    chosen = next(command for command in COMMANDS if command.name == arguments.command)
    return chosen, arguments


def _sentence(line: str) -> str:
    return f"{line[0].upper()}{line[1:]}."
