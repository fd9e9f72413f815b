"""What there is to say of a replay: near misses, who still feeds, doubtful times, what was assumed."""

from __future__ import annotations

import numpy as np

from seqfault.equations.relay_curves import EFFECTIVE_RANGE
from seqfault.errors import quoted
from seqfault.studies.replay import Replay, Way


def overrun(found: Replay) -> tuple[Way, ...]:
    """Relays that would operate within the overshoot of the demands after their current ceased or fell."""
    return tuple(way for way in found.ways if way.lacking <= found.first.protection.demands.overshoot)


def feeding(found: Replay) -> tuple[str, ...]:
    """Infeeds and generators that carry more than a hundredth of what is left in a fault that goes on."""
    t = found.final.terminals
    size = np.abs(t.phases).max(axis=0)
    return tuple(
        name
        for k, (name, kind) in enumerate(zip(t.element, t.kind, strict=True))
        if kind in ("infeed", "generator") and size[k] > 0.01 * found.left.phase > 0
    )


def unsure(found: Replay) -> tuple[str, ...]:
    """Inverse relays that operate below the range for which any accuracy of their time is declared."""
    relays = found.first.protection.relays
    return tuple(
        dict.fromkeys(
            event.relay
            for event in found.events
            if event.multiple < EFFECTIVE_RANGE[0] and relays[event.relay].curve != "definite"
        )
    )


def replay_assumed(found: Replay) -> tuple[str, ...]:
    """What the replay takes for granted beside the currents and settings, in sentences."""
    out = [
        "relays run by the dynamic formula of IEC 60255-151, the sum of dt/t(I); one that falls to its"
        " pickup or turns the wrong way begins anew at once, since a case states no reset time",
        "a relay that has operated stays so, and all three poles of its breakers open together, once for"
        " all: nothing recloses",
        "a relay stops where its current stops: no overshoot; one that would operate in the very moment a"
        " breaker opens counts as operated",
    ]
    if found.stuck:
        out.append(f"taken to stay closed: {', '.join(map(quoted, found.stuck))} (--stuck)")
    s = found.first.solution
    ties = {name for name, kind in zip(s.terminals.element, s.terminals.kind, strict=True) if kind == "tie"}
    if s.loaded and ties & {breaker.partition("@")[0] for breaker in found.opened}:
        out.append("once a tie has opened the load before the fault is taken as it flows with the tie open")
    if found.first.machines:
        out.append(
            "generators stay in step and none trips by itself; what motors feed alone dies away and is left"
            " out"
        )
    if any(kind == "converter" for kind in s.terminals.kind):
        out.append(
            "converters that breakers cut off from every infeed and generator stop at once: their own"
            " protection must see to that, and a case does not state it"
        )
    return tuple(out)
