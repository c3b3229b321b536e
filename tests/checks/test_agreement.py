"""An agreed deviation in words: what is left, how far off it is, and up to what it was agreed."""

from fractions import Fraction

import pytest

from realize.checks.agreement import agreed_text
from realize.checks.check import OUT, Check


def check(
    name: str, reference: object, obtained: object, difference: float | None, tolerance: float, unit: str
) -> Check:
    return Check(name, "stored", reference, obtained, difference, tolerance, unit, OUT, "")  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("out", "limit", "said"),
    [
        (
            check("loop phase margin", 49.1, 43.0, 6.1, 5.0, "deg"),
            7,
            "loop phase margin 43 deg, 6.1 deg less than the 49.1 deg of the continuous loop with hold and delay, "
            "agreed up to 7 deg",
        ),
        (
            check("loop phase margin", 28.0, 27.0, 3.0, 0.0, "deg"),
            4,
            "loop phase margin 27 deg, 3 deg below the floor, agreed up to 4 deg",
        ),
        (
            check("loop phase margin", None, 27.0, 3.0, 0.0, "deg"),
            4,
            "loop phase margin 27 deg, 3 deg below the floor, agreed up to 4 deg",
        ),
        (
            check("loop sensitivity", 1.25, 2.3, 1.05, 0.75, ""),
            "1.2",
            "loop sensitivity 2.3, 1.05 more than the 1.25 of the continuous loop with hold and delay, agreed "
            "up to 1.2",
        ),
        (
            check("loop sensitivity", 2.1, 2.3, 0.3, 0.0, ""),
            "0.5",
            "loop sensitivity 2.3, 0.3 above the limit, agreed up to 0.5",
        ),
        (
            check("loop overshoot", 28.2, 31.0, 2.8, 2.0, "%"),
            4,
            "loop overshoot 31 %, 2.8 points more than the 28.2 % of the continuous loop with hold and delay, agreed "
            "up to 4 points",
        ),
        (
            check("step overshoot", 9.2, 12.3, 3.1, 1.0, "%"),
            4,
            "step overshoot, 12.3 obtained, 3.1 points of difference, agreed up to 4 points",
        ),
        (
            check("zero shift", complex(-40), complex(-43), 7.5, 2.0, "%"),
            8,
            "zero shift, -43 obtained, 7.5 % of difference, agreed up to 8 %",
        ),
        (check("stability", "unstable", "unstable", 1.0, 0.0, ""), None, "stability, unstable obtained"),
        (check("saturation recovery", None, None, None, 5.0, "%"), None, "saturation recovery, no figure obtained"),
    ],
)
def test_an_agreed_deviation_says_what_is_left_and_what_was_agreed_to(out: Check, limit: object, said: str) -> None:
    assert agreed_text(out, None if limit is None else Fraction(str(limit))) == said
