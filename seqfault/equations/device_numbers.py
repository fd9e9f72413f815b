"""Device numbers of IEEE C37.2 for what a relay measures (from memory; suffixes are common practice)."""

from __future__ import annotations

# What is measured: instantaneous, with a time, directional.
_NUMBERS = {
    "residual": ("50N", "51N", "67N"),
    "core-balance": ("50G", "51G", "67G"),
    "neutral": ("50G", "51G", "67G"),
    "phase": ("50", "51", "67"),
    "negative-sequence": ("46", "46", "67"),
    "neutral-voltage": ("59N", "59N", "59N"),
}


def device_number(
    measures: str, *, delayed: bool = True, instant: bool = False, directional: bool = False
) -> str:
    """Device numbers of a relay, as in ``50N/51N``.

    ``measures`` as in the case file; ``delayed`` whether its main stage has a curve or a delay above 0 s
    (51 covers definite and inverse time); ``instant`` whether there is a second, fast stage. Raises
    KeyError for what the case file does not know.
    """
    fast, timed, direction = _NUMBERS[measures]
    if directional:
        return direction
    if not delayed:
        return fast
    return "/".join(dict.fromkeys((fast, timed))) if instant else timed
