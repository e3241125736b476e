"""What a module asks of the same rooms again is told again: most tests share theirs."""

import pytest

from service.audit.judge import assess_rooms
from tests.audit import builders


@pytest.fixture(scope="module", autouse=True)
def _assessed_once():
    """An assessment follows from values alone; only tests that ask for it anew compare two."""
    told = {}

    def assess_once(rooms, *, at):
        # Unlike equality, this tells 0.0 from -0.0 and 1 from True, and finds NaN again.
        key = repr((rooms, at))
        if key not in told:
            told[key] = assess_rooms(rooms, at=at)
        return told[key]

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(builders, "assess_rooms", assess_once)
        yield
