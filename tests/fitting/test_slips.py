"""Slips of the pen: the catalogue, and which of its repairs are worth a word."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from gradeline.fitting.slip_catalogue import SLIPS, decimals_of
from gradeline.fitting.slips import Swap, Written, rank_repairs

MORE = {"cm": 10.0, "in": 25.4, "ft": 304.8}  # in mm; 1 in = 25.4 mm by definition


def candidates(kind, value, decimals=0, places=1, factors=None):
    values = SLIPS[kind].candidates(np.array([value]), decimals, places, factors or {}).values[0]
    return sorted(round(float(each), 9) for each in values if math.isfinite(each))


@pytest.mark.parametrize(
    ("kind", "value", "decimals", "meant"),
    [
        ("transposed", 941.0, 0, [491.0, 914.0]),
        ("transposed", 9.41, 2, [4.91, 9.14]),
        ("transposed", 0.94, 2, [0.49, 9.04]),  # the zero before the point is a digit too
        ("transposed", 100.0, 0, []),  # 010 is no number that anybody writes, 100 is itself
        ("transposed", -35.0, 0, [-53.0]),
        ("sign", 12.5, 1, [-12.5]),
        ("sign", 0.0, 1, []),
        ("decimal point", 94.1, 1, [0.0941, 0.941, 9.41, 941.0, 9410.0, 94100.0]),
    ],
)
def test_the_values_that_may_have_been_meant(kind, value, decimals, meant):
    assert candidates(kind, value, decimals) == pytest.approx(meant)


def test_one_digit_changes_each_digit_to_every_other():
    found = candidates("one digit", 941.0)
    assert len(found) == 3 * 9 - 1  # all but 041
    assert {141.0, 901.0, 940.0, 949.0} <= set(found)
    assert 941.0 not in found
    assert 41.0 not in found


def test_a_leading_zero_stands_where_a_longer_number_was_to_be_written():
    assert 102.0 in candidates("transposed", 12.0, places=3)
    assert 912.0 in candidates("one digit", 12.0, places=3)
    assert 102.0 not in candidates("transposed", 12.0)


def test_a_number_read_in_another_unit():
    # 12 in a column of mm, read in inches: 12 x 25.4 mm.
    assert candidates("unit", 12.0, factors=MORE) == pytest.approx([120.0, 304.8, 3657.6])


numbers = st.integers(min_value=10, max_value=99_999)


@settings(max_examples=60, deadline=None)
@given(number=numbers, decimals=st.integers(0, 3), kind=st.sampled_from(["transposed", "one digit", "sign"]))
def test_what_a_slip_made_is_undone_by_the_same_slip(number, decimals, kind):
    original = number / 10**decimals
    places = len(str(number))
    for wrong in candidates(kind, original, decimals, places):
        assert round(original, 9) in candidates(kind, wrong, decimals, places)


@settings(max_examples=60, deadline=None)
@given(number=numbers, decimals=st.integers(0, 3))
def test_a_shifted_point_and_another_unit_are_undone(number, decimals):
    original = number / 10**decimals
    for wrong in candidates("decimal point", original, decimals):
        assert any(
            math.isclose(original, each, rel_tol=1e-6) for each in candidates("decimal point", wrong, 6)
        )
    for factor in MORE.values():
        meant = candidates("unit", original / factor, decimals, factors=MORE)
        assert any(math.isclose(original, each, rel_tol=1e-6) for each in meant)


@settings(max_examples=60, deadline=None)
@given(
    number=st.integers(min_value=1000, max_value=9999),
    place=st.integers(1, 3),
    step=st.integers(1, 9),
    misfit=st.floats(-1.0, 1.0),
)
def test_a_wrong_digit_far_off_is_repaired(number, place, step, misfit):
    """A digit of the hundreds or above, against an expectation of a two-thousandth of it: nothing else comes near."""
    digits = [int(each) for each in str(number)]
    at = 3 - min(place + 1, 3)
    digits[at] = (digits[at] + step) % 10
    wrong = float("".join(map(str, digits)))
    repairs = rank_repairs([Written("T", wrong, 0, number + 0.3 * misfit, 0.3)])
    assert repairs[0].value == number


def test_digits_as_written():
    assert [decimals_of(each) for each in (941.0, 94.1, 0.0095, 1e-12)] == [0, 1, 4, None]
    assert decimals_of(4 * 0.1 * 2352 * 22.86 / 0.361) is None  # worked out
    assert decimals_of(0.0941 * 1000) == 1  # the noise of a conversion is none of the digits


def test_the_odds_are_those_of_the_formula():
    """Two digits transposed, z = 0.5, 450 off: 0.08/2 φ(0.5)/0.8 over 1/(2 x 450 ln 50), by hand."""
    (best, *_) = rank_repairs([Written("T", 941.0, 0, 490.6, 0.8)])
    assert best.score == pytest.approx(0.5)
    by_hand = 0.08 / 2 * 0.3520653 / 0.8 * 2 * 450.4 * 3.912023
    assert best.odds == pytest.approx(by_hand, rel=1e-6)
    assert best.chance == pytest.approx(1 / (1 + by_hand), rel=1e-6)


def test_no_word_where_the_fit_would_be_chance():
    # 40 off with u = 1.1: one digit in ten would do as well.
    repairs = rank_repairs([Written("T", 1241.0, 0, 1281.3, 1.1)])
    assert [(each.kind, each.value, each.named) for each in repairs] == [("one digit", 1281.0, False)]
    # 200 off: few would.
    assert rank_repairs([Written("T", 1041.0, 0, 1241.3, 1.1)])[0].named
    # A loose expectation makes anything fit.
    assert not any(each.named for each in rank_repairs([Written("T", 1041.0, 0, 1241.3, 40.0)]))


def test_a_number_that_was_worked_out_has_no_digits_but_a_point():
    value = 4 * 0.1 * 23.9 * 61.2 / 2.855
    (best, *more) = rank_repairs([Written("A", value, None, value / 10 * 1.001, value / 10 * 0.002)])
    assert (best.kind, best.detail, best.named, more) == ("decimal point", "1/10", True, [])


def test_a_unit_that_is_a_point_off_stands_with_it():
    (best, *_) = rank_repairs([Written("T", 12.4, 1, 124.1, 0.5, {"cm": 10.0})])
    assert (best.kind, best.detail, best.value) == ("decimal point", "10 or cm", 124.0)


def test_neighbours_in_each_others_place_need_both_to_be_off():
    there = Swap("T5", 912.0, 844.2, 1.0)
    (best, *_) = rank_repairs([Written("T4", 844.0, 0, 911.7, 1.0, swaps=(there,))])
    assert (best.kind, best.detail, best.value, best.named) == ("swapped", "T5", 912.0, True)
    innocent = Swap("T5", 912.0, 912.2, 1.0)
    assert "swapped" not in {
        each.kind for each in rank_repairs([Written("T4", 844.0, 0, 911.7, 1.0, swaps=(innocent,))])
    }


def test_what_stands_in_the_row_above_has_no_repair():
    (best, *_) = rank_repairs([Written("T4", 844.0, 0, 911.7, 1.0, above=(844.0, 790.0))])
    assert (best.kind, best.named) == ("copied", True)
    assert math.isnan(best.value)


def test_what_begins_as_a_row_above_does():
    """2352 for 3752 with 2353 two rows above, as in the transcription of Stanton and Pannell's pipe 18."""
    (best, *_) = rank_repairs([Written("drop", 2352.0, 0, 3774.0, 44.0, above=(2969.0, 2353.0))])
    assert (best.kind, best.value, best.detail, best.named) == ("copied in part", 3752.0, "2", True)
    apart = rank_repairs([Written("drop", 2352.0, 0, 3774.0, 44.0, above=(2969.0, 2853.0))])
    assert not any(each.named for each in apart)


def test_of_several_numbers_only_one_holds_the_slip():
    """The chance is shared out among them."""
    one = Written("A", 1041.0, 0, 1241.3, 1.1)
    other = Written("flow", 0.873, 3, 0.7712, 0.0008)
    alone, both = rank_repairs([one]), rank_repairs([one, other])
    assert both[0].name == "A"
    assert both[0].chance > alone[0].chance


@pytest.mark.parametrize("bad", [{"u": 0.0}, {"u": math.nan}, {"expected": math.nan}, {"value": math.nan}])
def test_nothing_is_said_of_what_is_not_known(bad):
    assert (
        rank_repairs(
            [Written(**{"name": "T", "value": 941.0, "decimals": 0, "expected": 491.0, "u": 1.0} | bad)]
        )
        == ()
    )
