"""What is drawn is the network solved: its branches, reduced by themselves, give the Thevenin figure."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from seqfault.case.reader import case_from_tree, read_case
from seqfault.faults.network import Network
from seqfault.studies.sequence_links import REFERENCE
from seqfault.studies.sequence_view import SequenceView, sequence_views
from tests.conditioning import well_conditioned
from tests.strategies import PlainNetwork, networks, to_case_tree


def reduced(view: SequenceView) -> complex:
    """Driving-point impedance of node 0 from the drawn branches alone, by least squares.

    The branches' own nodal equations for a unit current at node 0, in extended precision: nodes that
    nothing ties to the reference make no difference and are left out.
    """
    n = len(view.nodes)
    tied = {REFERENCE}
    grown = True
    while grown:
        grown = False
        for b in view.branches:
            if (b.start in tied) != (b.end in tied):
                tied |= {b.start, b.end}
                grown = True
    if 0 not in tied:
        return complex(np.inf)
    y = np.zeros((n, n), np.clongdouble)
    for b in view.branches:
        ends = [k for k in (b.start, b.end) if k != REFERENCE]
        for k in ends:
            y[k, k] += 1 / np.clongdouble(b.z)
        if len(ends) == 2:
            y[ends[0], ends[1]] -= 1 / np.clongdouble(b.z)
            y[ends[1], ends[0]] -= 1 / np.clongdouble(b.z)
    left = [k for k in range(1, n) if k in tied]
    while left:  # the node with the strongest self-admittance against its row goes first
        strength = [abs(y[k, k]) / max(float(np.abs(y[k]).sum()), 1e-300) for k in left]
        k = left.pop(int(np.argmax(strength)))
        row, column, own = y[k].copy(), y[:, k].copy(), y[k, k]
        y -= np.outer(column, row) / own
    return complex(1 / y[0, 0])


CASES = [
    ("quarry", "main-a"), ("quarry", "loading-lv"), ("ridge", "ridge-110"), ("pumps", "works"),
    ("small", "far"),
]  # fmt: skip


@pytest.mark.parametrize(("name", "place"), CASES)
def test_the_shipped_cases_reduce_to_what_was_solved(name: str, place: str) -> None:
    network = Network(read_case(f"cases/{name}.toml"))
    for view in sequence_views(network, place):
        assert np.isfinite(view.thevenin)
        assert reduced(view) == pytest.approx(view.thevenin, rel=1e-9)


@settings(max_examples=60, suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large])
@given(data=st.data(), net=networks())
def test_drawn_networks_reduce_to_what_was_solved(net: PlainNetwork, data: st.DataObject) -> None:
    assume(well_conditioned(net))
    place = data.draw(st.sampled_from(sorted(net.buses)))
    network = Network(case_from_tree(to_case_tree(net)))
    for view in sequence_views(network, place):
        if not np.isfinite(view.thevenin) or not network.model.live[network.model.index[place]]:
            continue
        # a charging impedance of gigaohms behind ohms keeps seven digits in this elimination
        assert reduced(view) == pytest.approx(view.thevenin, rel=1e-5)
