"""Small words that the messages of checks share."""

from __future__ import annotations

from collections.abc import Sequence

_SPANS = ((365.25 * 86_400.0, "a"), (86_400.0, "d"), (3_600.0, "h"), (60.0, "min"), (1.0, "s"))
_AT_LEAST = 1.5
_SHOWN = 8


def span(seconds: float) -> str:
    """A time in s in the unit that reads best."""
    size, unit = next(((size, unit) for size, unit in _SPANS if abs(seconds) >= _AT_LEAST * size), _SPANS[-1])
    return f"{seconds / size:.3g} {unit}"


def percent(share: float) -> str:
    """A ratio in percent to three digits, with a true minus sign."""
    value = round(100.0 * share, 3)
    return f"{value:.3g} %".replace("-", "\u2212") if abs(value) < 999 else f"{value:.0f} %".replace("-", "\u2212")


def listed(names: Sequence[str]) -> str:
    """Names as in a sentence; beyond eight, how many more there are."""
    if len(names) > _SHOWN:
        return f"{', '.join(names[:_SHOWN])} and {len(names) - _SHOWN} more"
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"


def count(number: int, one: str, many: str | None = None) -> str:
    """A number with its noun."""
    return f"{number} {one if number == 1 else many or f'{one}s'}"
