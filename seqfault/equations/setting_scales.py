"""Settings that a relay has: those of a scale of equal steps, next to a wanted value.

Settings are ``least`` + n ``step``, n a whole number, up to ``greatest``. A value that differs from a
setting by less than a millionth of a step counts as that setting, so that rounding moves nothing.
"""

from __future__ import annotations

from math import ceil, floor, inf, nan

_SAME = 1e-6


def setting_at_least(value: float, step: float, least: float = 0.0, greatest: float = inf) -> float:
    """The smallest setting that is not below ``value``; NaN where the scale ends before it."""
    count = max(0, ceil((value - least) / step - _SAME))
    return _setting(count, step, least, greatest)


def setting_at_most(value: float, step: float, least: float = 0.0, greatest: float = inf) -> float:
    """The largest setting that is not above ``value``; NaN where the scale begins above it."""
    last = inf if greatest == inf else floor((greatest - least) / step + _SAME)
    count = min(floor((value - least) / step + _SAME), last)
    return _setting(count, step, least, greatest)


def _setting(count: float, step: float, least: float, greatest: float) -> float:
    value = least + count * step
    return value if count >= 0 and value <= greatest + _SAME * step else nan
