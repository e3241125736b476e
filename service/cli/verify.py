"""``rimeward verify``: prove the chain, the versions and the stored assessments."""

from argparse import ArgumentParser, Namespace

from service.settings import Settings

SHOWN = 20


def add_arguments(parser: ArgumentParser) -> None:
    """Declare the command's own arguments."""
    parser.add_argument("--site", metavar="ID", help="one site only, by its id")


def run(arguments: Namespace, settings: Settings) -> int:
    """Walk every chain and compute every assessment again; 1 where anything is wrong."""
    from service.changes.verify import verify
    from service.cli.opened import opened
    from service.store.scope import EVERYTHING

    with opened(settings) as database:
        report = verify(database, EVERYTHING, site_id=arguments.site)
    print(
        f"{report.sites} chains, {report.changes} changes, {report.versions} record versions,"
        f" {report.findings} finding versions, {report.assessments} assessments"
        f" ({report.recomputed} computed again)."
    )
    for told in report.other_methods[:SHOWN]:
        print(f"by another method: {told}")
    for fault in report.faults:
        print(f"WRONG: {fault.site_id} at {fault.position}: {fault.what}")
    if not report.sites:
        print("There is nothing to verify.")
        return 1
    print("Everything is as it was written." if report.sound else "This is not as it was written.")
    return 0 if report.sound else 1
