"""The demo estate: invented sites that show what the service says."""

from __future__ import annotations

import json
import re
from collections.abc import Iterator, Mapping
from datetime import datetime, timedelta
from importlib import resources
from pathlib import Path
from typing import Any, Final

from service.changes.records import carry_out
from service.changes.requested import CHANGE, CREATE, REMOVE, RecordChange
from service.clock import text_of
from service.store.live import list_records
from service.store.records import Record
from service.store.scope import EVERYTHING
from service.store.session import WriteSession
from service.store.tables.registry import KINDS

FILE: Final = "estate.json"
_AT_ONCE: Final = 500
_DAYS_AWAY: Final = re.compile(r"today([+-])(\d+)")
_MOMENTS: Final = frozenset({"counted_at", "silenced_since", "from", "to"})


def load_demo(session: WriteSession) -> int:
    """Create the demo estate, what stands in a site as one change; count its records."""
    return sum(_load_site(session, site) for site in json.loads(_text())["sites"])


def _load_site(session: WriteSession, site: Mapping[str, Any]) -> int:
    tag, own_basis = site["fields"]["tag"], site.get("own_basis")
    fields = {**site["fields"], "demo": True}
    made = carry_out(session, [RecordChange(CREATE, "site", None, fields)], "demo-load")
    if own_basis is not None:
        # A site is judged by its own basis once there is one, and before it has rooms to judge.
        basis = RecordChange(CREATE, "basis", None, {**own_basis, "site": tag})
        carry_out(session, [basis], "demo-load")
        judged = {"basis": own_basis["tag"]}
        to_own = RecordChange(CHANGE, "site", made.items[0].record.id, judged)
        carry_out(session, [to_own], "demo-load")
    changes = [
        RecordChange(CREATE, kind, None, _dated({**fields, "site": tag}, session.moment))
        for kind, fields in _records(site)
    ]
    carry_out(session, changes, "demo-load")
    return len(changes) + (1 if own_basis is None else 2)


def remove_demo(session: WriteSession) -> int:
    """Remove every demo site with all that stands in it; what was said of it stays in the past."""
    sites = [site for site in _all(session, "site", {}) if site.fields["demo"]]
    removed = 0
    for site in sites:
        # What the site is judged by goes last: it lets go of its own basis first.
        changes = [
            RecordChange(REMOVE, kind, record.id, {})
            for kind in KINDS
            if kind not in ("site", "basis")
            for record in _all(session, kind, {"site_id": site.id})
        ]
        bases = [
            RecordChange(REMOVE, "basis", basis.id, {})
            for basis in _all(session, "basis", {"site_id": site.id})
        ]
        if bases:
            back = RecordChange(CHANGE, "site", site.id, {"basis": "baseline"})
            carry_out(session, [back], "demo-remove")
        last = [*changes, *bases, RecordChange(REMOVE, "site", site.id, {})]
        carry_out(session, last, "demo-remove")
        removed += len(last)
    return removed


def _records(site: Mapping[str, Any]) -> Iterator[tuple[str, dict[str, Any]]]:
    """Give the kind and the fields of each record; what a group shares is said once."""
    for group in site["records"]:
        for fields in group["each"]:
            yield group["kind"], {**group.get("shared", {}), **fields}


def _dated(fields: Mapping[str, Any], moment: datetime) -> dict[str, Any]:
    """Replace days before or after the present one by dates: the estate does not grow stale."""
    return {name: _dated_value(name, value, moment) for name, value in fields.items()}


def _dated_value(name: str, value: Any, moment: datetime) -> Any:
    if isinstance(value, Mapping):
        return _dated(value, moment)
    if isinstance(value, list):
        return [_dated_value(name, each, moment) for each in value]
    told = _DAYS_AWAY.fullmatch(value) if isinstance(value, str) else None
    if told is None:
        return value
    days = timedelta(days=int(told[2]))
    then = moment - days if told[1] == "-" else moment + days
    return text_of(then) if name in _MOMENTS else then.date().isoformat()


def _all(session: WriteSession, kind: str, filters: Mapping[str, Any]) -> list[Record]:
    found: list[Record] = []
    after: tuple[Any, str] | None = None
    while True:
        page = list_records(
            EVERYTHING,
            session.connection,
            kind,
            filters,
            sort="id",
            descending=False,
            after=after,
            limit=_AT_ONCE,
        )
        found.extend(page)
        if len(page) < _AT_ONCE:
            return found
        after = (page[-1].id, page[-1].id)


def _text() -> str:
    # In a checkout the estate lies among the fixtures; in a wheel it goes with the package.
    packaged = resources.files("service").joinpath("_fixtures", "demo", FILE)
    if packaged.is_file():
        return packaged.read_text(encoding="utf-8")
    beside = Path(__file__).resolve().parents[2] / "fixtures" / "demo" / FILE
    return beside.read_text(encoding="utf-8")
