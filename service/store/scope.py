"""What a reader may see; every function that reads takes it as its first argument."""

from dataclasses import dataclass
from typing import Any, Final, TypeVar

from sqlalchemy import ColumnElement, Select, false, or_

Selected = TypeVar("Selected", bound=Select[*tuple[Any, ...]])


@dataclass(frozen=True, slots=True)
class Scope:
    """Who reads, in which role, and the sites that may be seen; no sites named: every site."""

    key_id: str
    role: str
    sites: frozenset[str] | None

    def sees(self, site_id: str | None) -> bool:
        """Say whether what belongs to a site, or to none and so to all, may be seen."""
        return site_id is None or self.sites is None or site_id in self.sites


EVERYTHING: Final = Scope(key_id="service", role="administrator", sites=None)
"""The scope of the service itself."""


def within(
    scope: Scope, query: Selected, site_id: ColumnElement[str | None], *, shared: bool = False
) -> Selected:
    """Narrow a query to the sites of a scope, with what belongs to no site where it is shared."""
    if scope.sites is None:
        return query
    of_sites = site_id.in_(sorted(scope.sites)) if scope.sites else false()
    return query.where(or_(of_sites, site_id.is_(None)) if shared else of_sites)
