"""``rimeward openapi``: print the description of the API, or compare it with the one kept."""

import json
import sys
from argparse import ArgumentParser, Namespace
from pathlib import Path

from service.settings import Settings

KEPT = Path(__file__).resolve().parents[2] / "fixtures" / "openapi.json"


def add_arguments(parser: ArgumentParser) -> None:
    """Declare the command's own arguments."""
    parser.add_argument(
        "--check",
        nargs="?",
        const=KEPT,
        type=Path,
        metavar="FILE",
        help="compare with a file, by default the one of the checkout, and fail where it differs",
    )


def run(arguments: Namespace, settings: Settings) -> int:
    """Describe the application; no database is opened for it."""
    from service.app import create_app

    document = json.dumps(create_app(settings).openapi(), indent=1, ensure_ascii=False) + "\n"
    if arguments.check is None:
        print(document, end="")
        return 0
    try:
        kept = arguments.check.read_text(encoding="utf-8")
    except OSError as error:
        print(f"{arguments.check} cannot be read: {error.strerror}.", file=sys.stderr)
        return 1
    if kept != document:
        print(
            f"{arguments.check} is not what the service answers. If the change is meant, write it "
            f"anew: rimeward openapi > {arguments.check}",
            file=sys.stderr,
        )
        return 1
    return 0
