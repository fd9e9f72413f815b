from __future__ import annotations

import os
from collections.abc import Iterator
from concurrent.futures import Executor, ProcessPoolExecutor, ThreadPoolExecutor
from multiprocessing import get_context
from pathlib import Path
from typing import Any

import msgspec
import numpy as np
import pytest

from seqfault import CaseError, Network, in_state, levels, read_case
from seqfault.errors import WorkerError
from seqfault.studies import batch
from seqfault.studies.batch import Item, new_pool, run_batch
from tests.cli.console import PLANT
from tests.cluster import running_cluster

CASE = read_case(PLANT)
CASES = [CASE, *(in_state(CASE, name) for name in CASE.scenarios)]


def surveys() -> list[Item]:
    return [Item(case, levels, machine=m) for case in CASES for m in ("subtransient", "transient")]


def same(one: Any, other: Any) -> bool:
    """Equal to the bit, field by field."""
    for name in one.__struct_fields__:
        a, b = getattr(one, name), getattr(other, name)
        if isinstance(a, np.ndarray):
            if a.tobytes() != b.tobytes():
                return False
        elif a != b:
            return False
    return True


def in_order(found: list[Any]) -> None:
    serial = run_batch(surveys())
    assert [each.state for each in found] == [item.case.state for item in surveys()]
    assert all(same(a, b) for a, b in zip(serial, found, strict=True))


@pytest.mark.parametrize("make", [ThreadPoolExecutor, new_pool])
def test_any_executor_gives_the_serial_answer_to_the_bit_and_in_order(make: Any) -> None:
    heard: list[int] = []
    with make(2) as executor:
        found = run_batch(surveys(), executor, done=heard.append)
    in_order(found)
    assert sorted(heard) == list(range(len(surveys())))


def test_a_network_is_made_once_and_not_for_another_prefault_machine_or_state(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    made: list[str] = []
    real = batch.Network

    def counted(case: Any, **more: Any) -> Network:
        made.append(case.state)
        return real(case, **more)

    monkeypatch.setattr(batch, "Network", counted)
    monkeypatch.setattr(batch, "_KEPT", batch._Kept())
    again = read_case(PLANT)  # equal, not the same object: what arrives in a worker
    run_batch([Item(CASE, levels), Item(again, levels)])
    assert len(made) == 1
    high = msgspec.structs.replace(
        CASE.prefault, voltage=msgspec.structs.replace(CASE.prefault.voltage, value=1.1)
    )
    raised = msgspec.structs.replace(CASE, prefault=high)
    one, other = run_batch([Item(CASE, levels), Item(raised, levels)])
    assert len(made) == 2
    assert other.k3 == pytest.approx(one.k3 * 1.1)
    run_batch([Item(raised, levels, machine="transient"), Item(CASES[1], levels, machine="transient")])
    assert len(made) == 4


def dying(network: Network, state: str, once: str) -> str:
    """Ends its process in ``state``: the first time only where ``once`` names a file to leave behind."""
    if network.case.state == state and not (once and Path(once).exists()):
        if once:
            Path(once).touch()
        os._exit(3)
    return network.case.state


def ill(network: Network) -> str:
    if network.case.state != "base":
        raise CaseError([f"line {network.case.state}", "another"], "some file")
    return "fine"


def test_a_worker_that_dies_is_told_with_its_item_and_the_item_tried_again(tmp_path: Path) -> None:
    told: list[str] = []
    items = [Item(case, dying, ("one-transformer", str(tmp_path / "died"))) for case in CASES * 3]
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as pool:
        found = run_batch(items, pool, lost=told.append)
    assert found == [case.state for case in CASES] * 3
    assert len(told) == 1
    assert "state one-transformer" in told[0]


def test_a_worker_that_dies_twice_names_the_one_item_to_blame() -> None:
    items = [Item(case, dying, ("island", "")) for case in CASES]
    told = pytest.raises(WorkerError, match="state island: the worker ended on this item twice")
    with ProcessPoolExecutor(1, mp_context=get_context("spawn")) as pool, told:
        run_batch(items, pool)


def test_items_beyond_the_window_go_on_after_a_loss(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(batch, "WINDOW", 2)
    told: list[str] = []
    items = [Item(case, dying, ("base", str(tmp_path / "died"))) for case in CASES * 3]
    with new_pool(2) as pool:
        assert run_batch(items, pool, lost=told.append) == [case.state for case in CASES] * 3
    assert len(told) == 1
    assert told[0].count("state ") <= 4


def test_the_first_error_in_order_arrives_whole() -> None:
    with new_pool(2) as pool, pytest.raises(CaseError) as caught:
        run_batch([Item(case, ill) for case in CASES], pool)
    assert caught.value.complaints == ("line one-transformer", "another")
    assert caught.value.source == "some file"


def test_no_items_no_work() -> None:
    with ThreadPoolExecutor(1) as pool:
        assert run_batch([], pool) == []


@pytest.fixture(scope="module")
def cluster() -> Iterator[str]:
    pytest.importorskip("distributed")
    with running_cluster() as address:
        yield address


@pytest.fixture
def client(cluster: str) -> Iterator[Executor]:
    import distributed

    with distributed.Client(cluster, timeout="60s", set_as_default=False) as client:
        client.wait_for_workers(1, timeout=60)
        yield client.get_executor(pure=False)


def test_a_cluster_gives_the_serial_answer_to_the_bit(client: Executor) -> None:
    in_order(run_batch(surveys(), client))


def test_a_cluster_worker_that_is_killed_is_told_and_its_item_tried_again(
    client: Executor, tmp_path: Path
) -> None:
    told: list[str] = []
    items = [Item(case, dying, ("island", str(tmp_path / "died"))) for case in CASES * 2]
    found = run_batch(items, client, lost=told.append, again=lambda: client)
    assert found == [case.state for case in CASES] * 2
    assert len(told) == 1
    assert "state island" in told[0]
