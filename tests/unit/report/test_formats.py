"""Numbers are printed so that no reader is misled about a decision."""

import math

import pytest

from mtest.report import formats


@pytest.mark.parametrize(
    ("p", "text"),
    [
        (0.0, "<0.001"),
        (0.0005, "<0.001"),
        (0.00099999, "<0.001"),
        (0.001, "0.001"),
        (0.0125, "0.013"),
        (0.0124999, "0.012"),
        (0.5, "0.500"),
        (0.999, "0.999"),
        (0.9990001, ">0.999"),
        (1.0, ">0.999"),
    ],
)
def test_p_prints_three_decimals_and_never_zero_or_one(p, text):
    assert formats.format_p(p) == text


@pytest.mark.parametrize(
    ("p", "text"),
    [(0.0495, "0.0495"), (0.04996, "0.04996"), (0.0504, "0.0504"), (0.0500004, "0.0500004"), (0.05, "0.050")],
)
def test_p_gains_digits_until_it_differs_from_alpha(p, text):
    assert formats.format_p(p, alpha=0.05) == text


def test_p_equal_to_alpha_keeps_three_decimals_where_alpha_is_another():
    assert formats.format_p(0.0495, alpha=0.025) == "0.050"


@pytest.mark.parametrize(("p", "text"), [(0.0004, "0.0004"), (0.00003, "<0.0001"), (0.99995, ">0.9999")])
def test_p_shows_the_digits_of_an_alpha_below_a_thousandth(p, text):
    assert formats.format_p(p, alpha=0.0005) == text


def test_printed_p_never_lies_on_the_other_side_of_alpha():
    for thousandth in range(1, 99_999):
        p = thousandth / 1_000_000
        text = formats.format_p(p, alpha=0.05)
        if not text.startswith(("<", ">")):
            assert (float(text) <= 0.05) == (p <= 0.05)


def test_nan_prints_as_a_dash():
    assert formats.format_p(math.nan) == formats.format_number(math.nan, 2) == "–"


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [
        (2.345, 2, "2.35"),
        (-2.345, 2, "−2.35"),
        (0.5, 0, "1"),
        (1.005, 2, "1.01"),
        (-0.0004, 2, "0.00"),
        (math.inf, 1, "∞"),
        (-math.inf, 1, "−∞"),
        (12345.6, 0, "12,346"),
    ],
)
def test_numbers_round_half_up_with_a_true_minus(value, digits, text):
    assert formats.format_number(value, digits) == text


@pytest.mark.parametrize(
    ("se", "digits"), [(1.74, 1), (9.94, 1), (9.96, 0), (0.0996, 2), (0.099, 3), (25.0, 0), (1e-9, 6)]
)
def test_digits_show_two_significant_digits_of_the_standard_error(se, digits):
    assert formats.digits_for(se) == digits


@pytest.mark.parametrize("se", [0.0, math.nan, math.inf])
def test_digits_fall_back_where_there_is_no_standard_error(se):
    assert formats.digits_for(se, fallback=3) == 3


def test_counts_too_long_for_a_float_still_print():
    assert formats.format_count(10**5000) == "1.0 × 10⁵⁰⁰⁰"


def test_alignment_puts_every_point_in_the_same_column():
    padded = formats.align_decimals(["1.25", "−10.5", "3", "–"])
    tails = {len(text) - text.index(".") for text in padded[:2]}
    assert len(tails) == 1
    assert padded[2] == "3" + formats.POINT_SPACE + 2 * formats.FIGURE_SPACE
    assert padded[3] == "–"


def test_an_interval_of_p_collapses_where_both_ends_print_alike():
    assert formats.format_p_range(0.0001, 0.0002) == "<0.001"
    assert formats.format_p_range(0.0001, 0.0024) == "<0.001 to 0.002"


def test_percent_keeps_only_the_digits_it_needs():
    assert formats.format_percent(0.05) == "5\u00a0%"
    assert formats.format_percent(0.0125) == "1.25\u00a0%"
