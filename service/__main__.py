"""The entry of the command line: ``rimeward`` and ``python -m service`` are the same."""

import os
import sys
from collections.abc import Sequence

from service.cli.arguments import parsed
from service.errors import RimewardError
from service.settings import Settings, SettingsError

INTERRUPTED = 130  # Common practice of shells: 128 and the number of SIGINT.


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status; what a caller can mend is one sentence."""
    command, arguments = parsed(sys.argv[1:] if argv is None else argv)
    try:
        return command.load().run(arguments, Settings.from_environment(os.environ))
    except (RimewardError, SettingsError) as error:
        print(f"rimeward: {error}", file=sys.stderr)
        return 1
    except KeyboardInterrupt:
        return INTERRUPTED


if __name__ == "__main__":
    sys.exit(main())
