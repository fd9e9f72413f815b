"""Short-circuit impedances of transformers, per unit on their own rating."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from seqfault.case.records import Pairs, Transformer, Winding, ZeroTests
from seqfault.equations.transformers import (
    magnetised_leakage,
    magnetising_from_tests,
    split_by_loss,
    split_by_ratio,
    three_winding_leakage,
)
from seqfault.errors import quoted
from seqfault.model.context import Context
from seqfault.model.elements import Complex


def _per_unit(r: Transformer, q: Any, winding: Winding, on: Any = None) -> float | complex:
    """``q`` on the rating of ``r``; ohm are those seen from ``winding`` at its rated voltage.

    Per cent refer to the rating ``on`` where it is stated.
    """
    rating = float(r.rating.value.real)
    if q.dimension == "impedance":
        seen = q.value * rating / winding.voltage.value.real**2
    else:
        seen = q.value * (rating / on.value.real if on is not None else 1.0)
    return seen if isinstance(seen, complex) else float(seen)


def _split(r: Transformer, value: float | complex) -> complex:
    """Resistance and reactance of an impedance that may be stated as a magnitude."""
    if isinstance(value, complex):
        return value
    if r.load_loss is not None:
        return complex(split_by_loss(value, r.load_loss.value.real, r.rating.value.real))
    assert r.x_over_r is not None
    return complex(split_by_ratio(value, r.x_over_r))


def _pairs(r: Transformer, pairs: Pairs) -> tuple[float | complex, ...]:
    """The three pairs; ohm are those seen from the first-named side."""
    on = r.impedance_on
    return tuple(
        _per_unit(r, getattr(pairs, pair), winding, getattr(on, pair) if on else None)
        for pair, winding in (("hv_lv", r.hv), ("hv_tv", r.hv), ("lv_tv", r.lv))
    )


def two_winding_impedances(records: Sequence[Transformer]) -> Complex:
    """Short-circuit impedances (m,) of units of two windings."""
    stated = [_per_unit(r, r.impedance, r.hv) for r in records]
    out = np.array(stated, complex)
    sizes = [k for k, z in enumerate(stated) if not isinstance(z, complex)]
    by_loss = [(k, r.load_loss.value.real) for k in sizes if (r := records[k]).load_loss is not None]
    by_ratio = [(k, r.x_over_r) for k in sizes if (r := records[k]).load_loss is None]
    if by_loss:
        at = [k for k, _ in by_loss]
        rating = np.array([records[k].rating.value.real for k in at])
        out[at] = split_by_loss(out[at].real, np.array([loss for _, loss in by_loss]), rating)
    if by_ratio:
        at = [k for k, _ in by_ratio]
        out[at] = split_by_ratio(out[at].real, np.array([ratio for _, ratio in by_ratio], float))
    return out


def positive_leakage(c: Context, name: str, r: Transformer) -> Complex:
    """Leakage admittance matrix (3, 3) of three windings in positive and negative sequence."""
    assert isinstance(r.impedance, Pairs)
    if r.load_loss is not None and any(not isinstance(z, complex) for z in _pairs(r, r.impedance)):
        c.complaints.append(
            f"transformer {quoted(name)}, load_loss: three windings have three load losses; state"
            " x_over_r, or complex impedances of the pairs"
        )
        return np.eye(3, dtype=complex)
    return three_winding_leakage(*(_split(r, z) for z in _pairs(r, r.impedance)))


def zero_leakage(
    c: Context, name: str, r: Transformer, connections: tuple[str, ...], z1: complex | None
) -> tuple[Complex | complex, bool]:
    """Zero-sequence admittance matrix (w, w), and whether it holds a magnetising branch.

    A single series impedance stands for the matrix of two windings that hold none; ``z1`` is that of
    positive sequence, None of three windings. A zigzag winding's own ``z0`` is not of this matrix (see
    ``zigzag_impedance``).
    """
    if len(connections) == 3 and r.z0_magnetising is not None:
        c.complaints.append(
            f"transformer {quoted(name)}, z0_magnetising: it goes with two windings; of three state z0 of"
            " the pairs, or zero_tests with a delta tv"
        )
    if r.zero_tests is not None and len(connections) == 3 and connections[2] != "delta":
        c.complaints.append(
            f"transformer {quoted(name)}, zero_tests: with three windings they need a delta tv, which is"
            " closed in the tests; state z0 of the pairs"
        )
        return np.eye(3, dtype=complex), False
    if r.zero_tests is not None:
        return _from_tests(c, name, r, r.zero_tests, len(connections)), True
    zigzag = "zigzag" in connections
    if isinstance(r.z0, Pairs):
        ones = [_split(r, z) for z in _pairs(r, r.impedance)] if isinstance(r.impedance, Pairs) else []
        z = [_angled(c, name, a, b) for a, b in zip(_pairs(r, r.z0), ones, strict=True)]
        return three_winding_leakage(*z), False
    if r.z0 is not None and not zigzag:
        assert z1 is not None
        first = _angled(c, name, _per_unit(r, r.z0, r.hv), z1)
    else:
        if r.z0_over_z1 is None and not (zigzag and len(connections) == 2):
            c.ledger.note("transformer", name, "z0 not stated, taken equal to z1 (z0_over_z1 = 1)")
        share = 1.0 if r.z0_over_z1 is None else r.z0_over_z1
        if z1 is None:
            return positive_leakage(c, name, r) / share, False
        first = z1 * share
    if r.z0_magnetising is not None:
        zm = _per_unit(r, r.z0_magnetising, r.hv)
        if not isinstance(zm, complex):
            c.ledger.note("transformer", name, "z0_magnetising stated as a magnitude, taken as reactance")
            zm = 1j * zm
        c.ledger.note("transformer", name, "z0 split in halves on either side of z0_magnetising")
        return magnetised_leakage(first / 2, first / 2, complex(zm)), True
    return complex(first), False


def zigzag_impedance(c: Context, name: str, r: Transformer, winding: Winding) -> complex:
    """Zero-sequence impedance of a zigzag winding, per unit on base power and bus voltage, one unit."""
    assert r.z0 is not None
    assert not isinstance(r.z0, Pairs)
    value = _per_unit(r, r.z0, winding)
    if not isinstance(value, complex):
        c.ledger.note("transformer", name, "z0 stated as a magnitude, taken as reactance")
        value = 1j * value
    nominal = float(c.nominal[c.index[winding.bus]])
    voltage = winding.voltage.value.real
    if r.tap is not None and winding is r.hv and r.z0.dimension == "ratio":
        voltage *= 1 + r.tap.value.real  # per cent hold at the tapped voltage
    change = (c.power / r.rating.value.real) * (voltage / nominal) ** 2
    return complex(value * change)


def _angled(c: Context, name: str, value: float | complex, z1: complex) -> complex:
    if isinstance(value, complex):
        return value
    c.ledger.note("transformer", name, "z0 stated as a magnitude, taken at the angle of z1")
    return complex(value * z1 / abs(z1))


def _from_tests(c: Context, name: str, r: Transformer, tests: ZeroTests, windings: int) -> Complex:
    """From zero-sequence tests, each per unit of the side it was made from."""
    values = []
    for q, winding in (
        (tests.from_hv, r.hv),
        (tests.from_lv, r.lv),
        (tests.from_hv_lv_shorted, r.hv),
    ):
        value = _per_unit(r, q, winding)
        if not isinstance(value, complex):
            c.ledger.note("transformer", name, "zero_tests stated as magnitudes, taken as reactances")
            value = 1j * value
        values.append(complex(value))
    z = magnetised_leakage(*magnetising_from_tests(*values))
    if windings == 2:
        return z
    # The closed delta is part of the tests; its ampere-turns balance the other two windings'.
    to_three = np.array([[1, 0], [0, 1], [-1, -1]], complex)
    return np.asarray(to_three @ z @ to_three.T)
