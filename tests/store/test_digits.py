"""Numbers to the digits that their interval supports."""

import pytest

from driftbook.store.digits import decimal_places, with_interval


@pytest.mark.parametrize(("value", "lower", "upper", "unit", "shown"), [
    (19.834, 18.11, 21.72, "", "19.8 (18.1–21.7)"),
    (41.2, 11.6, None, "d", "41 d (12 d – no end)"),
    (41.2, None, 60.0, "d", "41 d (no end – 60 d)"),
    (None, 11.6, None, "d", "– (11.6 d – no end)"),
    (41.2, None, None, "d", "41.2 d"),
    (None, None, None, "d", "–"),
    (1234567.0, 1200000.0, 1300000.0, "", "1234567 (1200000–1300000)"),
    (0.001234, 0.0011, 0.0014, "", "0.00123 (0.00110–0.00140)"),
    (-3.0, -5.25, 4.5, "", "-3.0 (-5.2 – 4.5)"),
    (0.0, 0.0, 0.0, "", "0 (0–0)"),
])  # fmt: skip
def test_a_number_is_shown_with_its_interval(value, lower, upper, unit, shown):
    assert with_interval(value, lower, upper, unit) == shown


@pytest.mark.parametrize(("value", "lower", "upper", "places"), [
    (19.8, 18.0, 21.6, 1), (19.8, 19.7, 19.9, 2), (19.8, 9.8, 29.8, 0), (19.8, 10.0, 29.0, 1),
    (200.0, 100.0, 300.0, 0),  # no rounding before the point
    (5.0, 4.004, 5.996, 1),  # a half-width that rounds up to one more digit
    (5.0, 4.9004, 5.0996, 2),
    (19.834, None, None, 1), (0.0123, None, None, 4), (1234.5, None, None, 0), (0.0, None, None, 0),
    (1000.0, None, None, 0), (999.5, None, None, 0), (100.0, None, None, 1), (10.0, None, None, 2),
    (None, None, None, 0), (float("nan"), None, None, 0),
])  # fmt: skip
def test_the_half_width_keeps_two_digits_and_a_number_alone_three(value, lower, upper, places):
    assert decimal_places(value, lower, upper) == places
