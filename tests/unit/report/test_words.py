"""Numbers as figures and reports print them."""

from math import inf, nan

import pytest

from lfptools.plot.words import probability, rounded, verdict_words, with_interval


@pytest.mark.parametrize(
    ("value", "lo", "hi", "text"),
    [
        (14.11, 13.71, 14.50, "14.1 ms [13.7, 14.5]"),
        (144.1, 138.0, 150.0, "144 ms [138, 150]"),
        (144.1, 142.2, 148.4, "144 ms [142, 148]"),
        (117.04, 115.11, 119.72, "117.0 ms [115.1, 119.7]"),
        (-0.0006, -0.0072, 0.0060, "-0.001 ms [-0.007, 0.006]"),
        (-0.0001, -0.0072, 0.0060, "0.000 ms [-0.007, 0.006]"),
        (5.0, 5.0, 5.0, "5.000 ms [5.000, 5.000]"),
        (5.0, nan, 6.0, "5 ms [no interval]"),
        (nan, 1.0, 2.0, ""),
    ],
)
def test_intervals_bear_as_many_decimals_as_their_width(value, lo, hi, text):
    assert with_interval(value, lo, hi, "ms") == text


@pytest.mark.parametrize(
    ("value", "text"), [(0.00049, ".00049"), (0.5, ".5"), (1.0, "1"), (0.999, "1"), (nan, "")]
)
def test_probabilities_have_two_digits_and_no_leading_zero(value, text):
    assert probability(value) == text


def test_infinite_values_are_empty():
    assert rounded(inf, 1) == ""


def test_a_lead_names_both_areas():
    row = {"area_a": "S1", "area_b": "M1", "verdict": "leads", "leader": "M1"}
    assert verdict_words(row) == "M1 leads S1"
    assert verdict_words({**row, "verdict": "withheld", "leader": ""}) == "withheld"
