"""Numbers in sentences: short, and never milder than they are."""

import pytest

from service.audit.rules.words import at_least, at_most, duration_text, listed, oxygen_text


@pytest.mark.parametrize(
    ("value", "down", "up"),
    [
        (4.9998, "4.99", "5.00"),
        (5.0, "5.00", "5.00"),
        (0.012345, "0.0123", "0.0124"),
        (123.4, "123", "124"),
        (98765.4, "98700", "98800"),
        (0.0, "0", "0"),
    ],
)
def test_figures_are_rounded_to_the_side_that_is_safe(value, down, up):
    assert (at_most(value), at_least(value)) == (down, up)


def test_an_oxygen_figure_beyond_a_mark_never_reads_as_the_mark():
    assert oxygen_text(19.49999, low=True) == "19.49 %"
    assert oxygen_text(23.00001, low=False) == "23.01 %"
    assert oxygen_text(18.55, low=True) == "18.55 %"
    assert oxygen_text(0.0, low=True) == "0.00 %"


@pytest.mark.parametrize(
    ("seconds", "text"),
    [
        (0.0, "0 s"),
        (119.0, "119 s"),
        (120.0, "2 min"),
        (7199.0, "120 min"),
        (345_600.0, "96 h"),
        (9000.0, "2.5 h"),
    ],
)
def test_a_time_is_told_in_the_unit_people_would_use(seconds, text):
    assert duration_text(seconds) == text


def test_names_are_listed_and_many_are_counted():
    assert listed([]) == ""
    assert listed(["A"]) == "A"
    assert listed(["A", "B"]) == "A and B"
    assert listed(["A", "B", "C"]) == "A, B and C"
    assert listed(["A", "B", "C", "D", "E"]) == "A, B, C and 2 more"
