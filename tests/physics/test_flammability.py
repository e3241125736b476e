"""Outside: worked examples printed in handbooks."""

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from service.physics.errors import OutOfRange
from service.physics.flammability import mixture_lower_limit, share_of_lower_limit

GASES = 4
limits = st.lists(st.floats(0.01, 0.2), min_size=GASES, max_size=GASES)
# Nothing, or more than a millionth of a cubic millimetre in a litre: less only underflows.
amount = st.just(0.0) | st.floats(1e-12, 0.25)
amounts = st.lists(amount, min_size=GASES, max_size=GASES)


def test_natural_gas_has_the_lower_limit_that_the_bureau_of_mines_prints():
    """Coward and Jones, Bulletin 503 (1952), from memory.

    80 % methane, 15 % ethane, 4 % propane and 1 % butane, of 5.3, 3.22, 2.37 and 1.86 %: 4.55 %.
    """
    limit = mixture_lower_limit([80.0, 15.0, 4.0, 1.0], [0.053, 0.0322, 0.0237, 0.0186])
    assert_allclose(limit, 0.0455, atol=5e-5)


def test_a_mixture_in_air_is_judged_as_the_textbook_judges_it():
    """Crowl and Louvar, Chemical Process Safety, example on mixtures, from memory.

    0.8 % hexane, 2.0 % methane and 0.5 % ethylene in air, of 1.2, 5.3 and 3.1 %, have a limit of
    2.75 %, and burn at 3.3 %.
    """
    fractions, lower = np.array([0.008, 0.020, 0.005]), [0.012, 0.053, 0.031]
    # The book rounds the shares of the gases to two figures on the way.
    assert_allclose(mixture_lower_limit(fractions, lower), 0.0275, rtol=6e-3)
    assert_allclose(share_of_lower_limit(fractions, lower), 3.3 / 2.75, rtol=6e-3)


def test_one_gas_alone_is_judged_by_its_own_limit():
    """Hydrogen 4 %, methane 4.4 %: IEC 60079-20-1, from memory; a quarter is 1 and 1.1 %."""
    alone = share_of_lower_limit([[0.01, 0.0], [0.0, 0.011]], [0.04, 0.044])
    assert_allclose(alone, [0.25, 0.25], rtol=1e-12)
    assert_allclose(
        mixture_lower_limit([[0.3, 0.0], [0.0, 0.3]], [0.04, 0.044]), [0.04, 0.044], rtol=1e-12
    )


@given(fractions=amounts, lower=limits)
def test_the_limit_of_a_mixture_lies_between_those_of_its_gases(fractions, lower):
    present = [limit for limit, amount in zip(lower, fractions, strict=True) if amount > 0.0]
    assume(sum(fractions) > 1e-9)
    limit = mixture_lower_limit(fractions, lower)
    assert min(present) * (1.0 - 1e-9) <= limit <= max(present) * (1.0 + 1e-9)


@given(fractions=amounts, lower=limits, more=amount, which=st.integers(0, GASES - 1))
def test_more_of_a_gas_is_never_safer(fractions, lower, more, which):
    richer = list(fractions)
    richer[which] += more
    assert share_of_lower_limit(richer, lower) >= share_of_lower_limit(fractions, lower)


@given(fractions=amounts, lower=limits)
def test_the_share_is_one_where_the_mixture_is_at_its_limit(fractions, lower):
    whole = sum(fractions)
    assume(whole > 1e-6)
    at_limit = np.array(fractions) / whole * mixture_lower_limit(fractions, lower)
    assert_allclose(share_of_lower_limit(at_limit, lower), 1.0, rtol=1e-9)


def test_where_no_gas_burns_nothing_is_near_the_limit():
    assert share_of_lower_limit([0.0, 0.0], [0.04, 0.044]) == 0.0
    assert mixture_lower_limit([0.0, 0.0], [0.044, 0.04]) == 0.04


def test_the_gases_lie_along_the_axis_that_is_named():
    fractions = np.array([[0.01, 0.0, 0.02], [0.0, 0.011, 0.0]])
    by_column = share_of_lower_limit(fractions, [[0.04], [0.044]], axis=0)
    assert_allclose(by_column, [0.25, 0.25, 0.5])
    assert_allclose(share_of_lower_limit(fractions.T, [0.04, 0.044]), by_column)
    assert_allclose(mixture_lower_limit(fractions, [[0.04], [0.044]], axis=0), [0.04, 0.044, 0.04])


@pytest.mark.parametrize("wrong", [0.0, -0.04, 1.01, np.nan])
def test_a_limit_that_no_gas_has_is_refused(wrong):
    for judged in (mixture_lower_limit, share_of_lower_limit):
        with pytest.raises(OutOfRange, match=r"^lower_limits must be"):
            judged([0.01, 0.01], [0.04, wrong])


@pytest.mark.parametrize("wrong", [-0.01, np.nan, np.inf])
def test_a_fraction_that_no_air_has_is_refused(wrong):
    for judged in (mixture_lower_limit, share_of_lower_limit):
        with pytest.raises(OutOfRange, match=r"^fractions must be"):
            judged([0.01, wrong], [0.04, 0.044])
    with pytest.raises(OutOfRange, match=r"^fractions must be"):
        share_of_lower_limit([1.01], [0.04])
