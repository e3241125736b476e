"""The merge of a patch into a document, RFC 7396."""

from collections.abc import Mapping
from typing import Any


def merge_patch(target: Any, patch: Any) -> Any:
    """Return the target with a patch merged in; neither is changed, lists are replaced whole.

    A null removes a member, an object is merged member by member, anything else takes the place
    of what was there.
    """
    if not isinstance(patch, Mapping):
        return patch
    merged = dict(target) if isinstance(target, Mapping) else {}
    for name, value in patch.items():
        if value is None:
            merged.pop(name, None)
        else:
            merged[name] = merge_patch(merged.get(name), value)
    return merged
