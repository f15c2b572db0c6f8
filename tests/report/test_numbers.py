"""Figures are written with two digits of their uncertainty (GUM, JCGM 100:2008, 7.2.6), unit and interval."""

import math

import pytest

from tomofolio.report.numbers import (
    between,
    count,
    decimals_of,
    figure,
    percent,
    plain,
    trimmed,
    volume,
    with_unit,
)


@pytest.mark.parametrize(
    ("uncertainty", "decimals"),
    [(0.415, 2), (0.0415, 3), (4.15, 1), (12.0, 0), (340.0, -1), (0.0996, 2), (0.1, 2), (9.96, 0), (1.0, 1)],
)
def test_decimals_show_two_digits_of_the_uncertainty(uncertainty, decimals):
    assert decimals_of(uncertainty) == decimals


def test_figure_and_its_interval_have_the_same_decimals():
    assert str(figure(12.3141, (11.9, 12.73), "mm³")) == "12.31\u2009mm³ (11.90 to 12.73)"


def test_large_uncertainty_rounds_to_tens_and_hundreds():
    assert str(figure(123456.0, (118000.0, 128000.0))) == "123\u2009500 (118\u2009000 to 128\u2009000)"


def test_minus_is_typographic_and_never_stands_before_zero():
    assert plain(-350.23, 1) == "\u2212350.2"
    assert plain(-0.04, 1) == "0.0"


def test_a_tiny_interval_does_not_call_for_endless_digits():
    assert figure(12.3456789, (12.3456788, 12.3456790)).value == "12.3457"


def test_without_interval_three_digits_count_and_whole_parts_stay():
    assert [figure(v).value for v in (0.012345, 1.2345, 12.345, 1234.56)] == ["0.0123", "1.23", "12.3", "1235"]


@pytest.mark.parametrize("nothing", [None, math.nan, math.inf])
def test_what_is_no_number_is_not_available(nothing):
    assert str(figure(nothing, unit="mm")) == "not available"
    assert not figure(nothing).exists


def test_zero_is_a_number():
    assert figure(0.0).value == "0"
    assert str(figure(0.0, (0.0, 0.3), "mm³")) == "0.00\u2009mm³ (0.00 to 0.30)"


def test_volume_switches_to_cubic_centimetres_at_a_thousand_cubic_millimetres():
    assert str(volume(999.4)) == "999\u2009mm³"
    assert str(volume(1000.0)) == "1.00\u2009cm³"
    assert str(volume(5431.7, (5402.2, 5461.9))) == "5.432\u2009cm³ (5.402 to 5.462)"


def test_numbers_are_grouped_from_five_digits_on():
    assert (count(9999), count(10000), count(1234567)) == ("9999", "10\u2009000", "1\u2009234\u2009567")


def test_units_stand_apart_by_a_thin_space_but_degrees_stand_close():
    assert with_unit("12.3", "HU") == "12.3\u2009HU"
    assert with_unit("18.5", "°") == "18.5°"
    assert with_unit("3", "") == "3"


def test_interval_ends_are_parted_by_a_word_since_a_dash_looks_like_a_minus():
    assert between("\u22125.0", "\u22123.0") == "\u22125.0 to \u22123.0"


def test_per_cent_keeps_its_interval():
    assert str(percent(0.0293, (0.0276, 0.0314))) == "0.0293\u2009% (0.0276 to 0.0314)"


@pytest.mark.parametrize(("value", "text"), [(0.4883, "0.4883"), (1.0, "1"), (0.0, "0"), (6.99, "6.99"), (250, "250")])
def test_given_numbers_have_no_trailing_zeros(value, text):
    assert trimmed(value) == text
