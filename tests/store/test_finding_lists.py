"""Which index a list of findings goes by: it grows for years, and nearly all of it is cleared."""

import pytest

from service.store.findings import count, list_findings
from service.store.scope import EVERYTHING, Scope
from tests.store.plans import ON_SQLITE, plan_of

STANDING = ["open", "acknowledged", "accepted"]
OF_A_SITE = Scope("key", "reader", frozenset({"a site"}))
BY_SITE_AND_STATE = "ix_finding_of_site (site_id=? AND state=?)"


@ON_SQLITE
@pytest.mark.parametrize("sort", ["id", "severity", "opened_at"])
@pytest.mark.parametrize(
    ("scope", "filters", "index"),
    [
        (OF_A_SITE, {}, BY_SITE_AND_STATE),
        (EVERYTHING, {"site_id": ["s", "t"], "family": "oxygen"}, BY_SITE_AND_STATE),
        (EVERYTHING, {"site_id": "s"}, BY_SITE_AND_STATE),
        (OF_A_SITE, {"label.ward": "1"}, BY_SITE_AND_STATE),
        (EVERYTHING, {"site_id": "s", "severity": ["major"]}, "AND state=? AND severity=?"),
        (EVERYTHING, {"room_id": "r"}, "ix_finding_identity (room_id=?"),
        (EVERYTHING, {"room_id": ["r"], "rule": "r", "subject_id": "s"}, "AND subject_id=?"),
    ],
)
def test_a_list_goes_by_an_index_past_what_is_cleared(database, scope, filters, index, sort):
    asked = {"state": STANDING, **filters}
    with database.reading() as connection:
        listed = plan_of(connection, lambda: list_findings(scope, connection, asked, sort=sort))
        counted = plan_of(connection, lambda: count(scope, connection, asked))
    for plan in (listed, counted):
        assert any(index in step for step in plan), plan
        assert not any(step.startswith("SCAN finding") for step in plan), plan
