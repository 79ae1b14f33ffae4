"""Numbers in messages read well at both ends of their range."""

from __future__ import annotations

import pytest

from perdure.checks.words import count, listed, percent, span


@pytest.mark.parametrize(
    ("share", "shown"), [(0.0, "0 %"), (0.123, "12.3 %"), (-0.05, "−5 %"), (1.0, "100 %"), (12.5, "1250 %"), (1e-9, "0 %")]
)
def test_percent_has_no_exponent(share: float, shown: str) -> None:
    assert percent(share) == shown


@pytest.mark.parametrize(
    ("seconds", "shown"), [(0.02, "0.02 s"), (60.0, "60 s"), (7200.0, "2 h"), (864_000.0, "10 d"), (315_576_000.0, "10 a")]
)
def test_span_takes_the_unit_that_reads_best(seconds: float, shown: str) -> None:
    assert span(seconds) == shown


def test_long_lists_say_how_much_they_leave_out() -> None:
    assert listed(["a"]) == "a"
    assert listed(["a", "b", "c"]) == "a, b and c"
    assert listed([str(n) for n in range(10)]) == "0, 1, 2, 3, 4, 5, 6, 7 and 2 more"


def test_nouns_follow_their_number() -> None:
    assert [count(1, "batch", "batches"), count(2, "batch", "batches"), count(0, "reading")] == ["1 batch", "2 batches", "0 readings"]
