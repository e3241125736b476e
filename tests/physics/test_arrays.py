import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from service.physics.arrays import (
    between,
    finite,
    fraction,
    non_negative,
    positive,
    quotient,
    rounded,
    sum_by_group,
)
from service.physics.errors import OutOfRange

WRONG = {
    positive: [0.0, -1.0, np.nan, np.inf, None],
    non_negative: [-1e-300, np.nan, np.inf, None],
    fraction: [-1e-9, 1.0 + 1e-9, np.nan, np.inf, None],
    finite: [np.nan, np.inf, -np.inf, None],
}


@pytest.mark.parametrize(
    ("check", "value"),
    [(check, value) for check, values in WRONG.items() for value in values],
    ids=lambda part: getattr(part, "__name__", str(part)),
)
def test_a_check_refuses_one_wrong_value_among_good_ones_by_name(check, value):
    with pytest.raises(OutOfRange, match=r"^share must be ") as refused:
        check("share", np.array([0.5, value], dtype=float))
    assert refused.value.parameter == "share"
    assert isinstance(refused.value, ValueError)


@pytest.mark.parametrize("check", [positive, non_negative, fraction, finite])
def test_a_check_keeps_shape_and_value(check):
    given = np.array([[0.25], [1.0]])
    assert check("share", given).shape == (2, 1)
    assert np.array_equal(check("share", given), given)
    assert check("share", 1).dtype == np.float64
    assert check("share", []).size == 0


def test_a_range_holds_at_both_of_its_ends():
    assert np.array_equal(between("height", [-1.0, 2.0], -1.0, 2.0), [-1.0, 2.0])
    with pytest.raises(OutOfRange, match="height must be from -1 to 2"):
        between("height", 2.0001, -1.0, 2.0)


def test_a_quotient_divides_nothing_by_zero():
    assert np.array_equal(quotient([1.0, 0.0, 3.0], [2.0, 0.0, 0.0], where_zero=9.0), [0.5, 9, 9])


@given(st.floats(allow_nan=True, allow_infinity=True))
def test_rounding_gives_the_double_nearest_to_ten_figures(value):
    """Outside: the decimal formatting of the language, which rounds the exact binary value."""
    result = float(rounded(value))
    if not np.isfinite(value) or value == 0.0:
        assert np.array_equal(result, value, equal_nan=True)
    else:
        expected = float(f"{value:.9e}")
        # A tie in the tenth figure may fall to either side; anything else is exact.
        assert result == pytest.approx(expected, rel=1.0001e-9)
        assert result == float(f"{result:.9e}")


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_rounding_twice_is_rounding_once(value):
    once = rounded(value)
    assert np.array_equal(rounded(once), once)


def test_rounding_makes_numbers_short_and_keeps_what_has_no_figures():
    values = [0.1 + 0.2, 2 / 3, 1e20 / 3, 1e-20 / 3, 999.99999999999, 0.0, np.inf, -np.inf]
    expected = [0.3, 0.6666666667, 3.333333333e19, 3.333333333e-21, 1000.0, 0.0, np.inf, -np.inf]
    assert rounded(values).tolist() == expected
    assert np.isnan(rounded([np.nan])).all()
    assert rounded(np.full((2, 3), -1 / 3)).tolist() == np.full((2, 3), -0.3333333333).tolist()


@given(st.lists(st.tuples(st.integers(0, 4), st.floats(-1e6, 1e6)), max_size=30))
def test_a_sum_by_group_adds_in_the_order_of_the_records(records):
    expected = [0.0] * 5
    for group, value in records:
        expected[group] += value
    groups, values = [group for group, _ in records], [value for _, value in records]
    assert sum_by_group(values, groups, 5).tolist() == expected


@pytest.mark.parametrize(
    ("values", "groups", "named"),
    [
        ([np.nan], [0], "values"),
        ([1.0], [2], "groups"),
        ([1.0], [-1], "groups"),
        ([1.0, 2.0], [0], "groups"),
    ],
)
def test_a_sum_by_group_refuses_what_it_cannot_place(values, groups, named):
    with pytest.raises(OutOfRange, match=f"^{named} must be"):
        sum_by_group(values, groups, 2)
