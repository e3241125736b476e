"""Formulas are tested with every floating-point error raised, as nothing may be silenced."""

import csv
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest

HANDBOOK = Path(__file__).parents[2] / "fixtures" / "handbook"

Row = dict[str, str]


@pytest.fixture(autouse=True)
def _floating_point_errors_are_raised() -> Iterator[None]:
    with np.errstate(all="raise"):
        yield


@pytest.fixture
def handbook() -> Callable[[str], list[Row]]:
    """Read a printed table; its first line names the source and the page."""

    def read(name: str) -> list[Row]:
        source, *lines = (HANDBOOK / name).read_text(encoding="utf-8").splitlines()
        assert source.startswith("# ")
        return list(csv.DictReader(lines))

    return read
