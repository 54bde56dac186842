"""Figures as words: no figure without its unit, no estimate without its interval or that there is none."""

import pytest

from driftbook.store import figures


@pytest.mark.parametrize(
    ("ends", "unit", "shown"),
    [
        ((0.311, 0.286, 0.342), "1/√year", "31.1 (28.6–34.2) %"),
        ((358.2, 322.0, 395.0), "EUR/MWh/√year", "358 (322–395) EUR/MWh"),
        ((1.62, None, None), "1/√year", "162 %, no interval"),
        ((0.75, None, None), "/√year", "0.750, no interval"),
        ((None, None, None), "1/√year", "no number"),
    ],
)
def test_a_volatility_has_its_unit_and_its_interval_or_says_that_there_is_none(ends, unit, shown):
    assert figures.volatility(*ends, unit) == shown


@pytest.mark.parametrize(
    ("ends", "unbounded", "shown"),
    [
        ((3.91, 2.74, 6.41), False, "3.9 (2.7–6.4) d"),
        ((41.2, 11.6, None), True, "41 d (12 d – no end)"),
        ((None, 78.1, None), True, "over 78.1 d"),
        ((None, None, None), True, "no pull seen"),
        ((None, None, None), None, "no number"),
    ],
)
def test_a_half_life_without_evidence_of_a_pull_says_from_where_on_it_lies(ends, unbounded, shown):
    assert figures.half_life(*ends, unbounded=unbounded) == shown


def test_a_unit_from_a_file_cannot_drive_the_terminal():
    assert figures.with_unit(2.5, "EUR\x1b[2J") == r"2.5 EUR\x1b[2J"


def test_a_value_without_unit_stands_alone_and_no_value_is_a_word():
    assert [figures.with_unit(0.123456789, None), figures.with_unit(None, "EUR")] == ["0.123457", "no number"]
