"""Shares and their intervals in words: no end is rounded to what it is not."""

import pytest

from evalcore.figures import Interval
from evalcore.wording import NBSP, interval, with_interval


def said(low: float, high: float, n: int) -> str:
    return interval(Interval(low, high, 0.95, "wilson"), n).replace(NBSP, " ")


class TestInterval:
    @pytest.mark.parametrize(
        ("low", "n", "expected"),
        [
            (0.9949, 38, "99–100 %"),
            (0.996, 38, ">99–100 %"),
            (0.9999, 199, ">99–100 %"),
            # with a decimal from 200 on
            (0.996, 200, "99.6–100.0 %"),
            (0.9996, 200, ">99.9–100.0 %"),
            # what is certain is called so
            (1.0, 38, "100–100 %"),
        ],
    )
    def test_a_lower_end_is_not_rounded_up_to_certainty(self, low, n, expected):
        assert said(low, 1.0, n) == expected

    @pytest.mark.parametrize(
        ("high", "n", "expected"),
        [
            (0.0051, 38, "0–1 %"),
            (0.004, 38, "0–<1 %"),
            (0.0001, 199, "0–<1 %"),
            (0.004, 200, "0.0–0.4 %"),
            (0.0004, 200, "0.0–<0.1 %"),
            (0.0, 38, "0–0 %"),
        ],
    )
    def test_an_upper_end_is_not_rounded_down_to_none(self, high, n, expected):
        assert said(0.0, high, n) == expected

    @pytest.mark.parametrize(
        ("low", "high", "expected"),
        [
            (0.72, 0.95, "72–95 %"),
            # outwards an end may be rounded: it promises less
            (0.004, 0.996, "0–100 %"),
            (0.5, 0.5, "50–50 %"),
        ],
    )
    def test_other_ends_are_rounded(self, low, high, expected):
        assert said(low, high, 38) == expected

    def test_beside_a_share(self):
        bounds = Interval(0.996, 1.0, 0.95, "wilson")
        assert with_interval(1.0, bounds, 38).replace(NBSP, " ") == "100 % (>99–100 %)"
        nowhere = Interval(float("nan"), float("nan"), 0.95, "wilson")
        assert interval(nowhere, 38) == "undefined"
        assert with_interval(1.0, nowhere, 38).replace(NBSP, " ") == "100 %"
        assert with_interval(1.0, None, 38).replace(NBSP, " ") == "100 %"
