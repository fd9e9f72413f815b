"""Any study over many cases or states, on any ``concurrent.futures.Executor``.

A study is a module-level function of a network and further arguments, so that an item travels as a
``Case`` and the name of a function. Factors do not travel: a process keeps the network it worked on last.
"""

from __future__ import annotations

import sys
import threading
from collections import deque
from collections.abc import Callable, Iterable, Sequence
from concurrent.futures import FIRST_COMPLETED, BrokenExecutor, Executor, Future, ProcessPoolExecutor, wait
from multiprocessing import get_context
from typing import Any

import msgspec

from seqfault.case.records import Case
from seqfault.errors import WorkerError
from seqfault.faults.network import Network
from seqfault.model.build import Machine

WINDOW = 64
"""Items handed out at a time: those that a broken pool can have been at work on."""


class Item(msgspec.Struct, frozen=True, eq=False):
    """One study of one network: ``study(network, *arguments)``."""

    case: Case
    study: Callable[..., Any]
    arguments: tuple[Any, ...] = ()
    machine: Machine = "subtransient"

    @property
    def name(self) -> str:
        """The case and its state."""
        return f"{self.case.title or self.case.source}, state {self.case.state}"


class _Kept:
    """The network that this process worked on last."""

    def __init__(self) -> None:
        self._lock = threading.Lock()
        self._network: Network | None = None

    def network(self, case: Case, machine: Machine) -> Network:
        with self._lock:
            kept = self._network
        if kept is not None and kept.machine == machine and _same(kept.case, case):
            return kept
        made = Network(case, machine=machine)
        with self._lock:
            self._network = made
        return made


_KEPT = _Kept()


def _same(one: Case, other: Case) -> bool:
    if one is other:
        return True
    first = (one.sha256, one.state, one.prefault)
    return first == (other.sha256, other.state, other.prefault) and one == other


def work_on(item: Item) -> Any:
    """What a worker does with ``item``: make its network, or take the one at hand, and study it."""
    return item.study(_KEPT.network(item.case, item.machine), *item.arguments)


def new_pool(workers: int | None = None) -> ProcessPoolExecutor:
    """A pool of ``workers`` fresh processes, as many as there are cores where it is None."""
    return ProcessPoolExecutor(workers, mp_context=get_context("spawn"), initializer=_leave_quietly)


def _leave_quietly() -> None:
    """An interrupt ends a worker without a traceback of its own."""
    import signal

    signal.signal(signal.SIGINT, signal.SIG_DFL)


def run_batch(
    items: Iterable[Item],
    executor: Executor | None = None,
    *,
    done: Callable[[int], None] | None = None,
    lost: Callable[[str], None] | None = None,
    again: Callable[[], Executor] = new_pool,
) -> list[Any]:
    """The result of every item, in their order, the same to the bit on any ``executor``.

    Without an executor the items run here, one after the other. ``done`` hears the number of each item
    that is finished, ``lost`` a sentence for each worker that ended. What such a worker may have held is
    tried once more, alone, on an executor that ``again`` makes. Raises ``WorkerError`` naming an item
    that ends a worker again, and whatever the first failing item in order raises.
    """
    every = list(items)
    heard, told = done or _nothing, lost or _nothing
    if executor is None:
        out = []
        for number, item in enumerate(every):
            out.append(work_on(item))
            heard(number)
        return out
    return _Run(every, heard, told, again).on(executor)


def _nothing(_: object) -> None:
    pass


class _Run:
    """Items on their way through an executor."""

    def __init__(
        self,
        items: Sequence[Item],
        done: Callable[[int], None],
        lost: Callable[[str], None],
        again: Callable[[], Executor],
    ) -> None:
        self._items, self._done, self._lost, self._again = items, done, lost, again
        self._results: dict[int, Any] = {}
        self._failed: dict[int, BaseException] = {}
        self._waiting = deque(range(len(items)))

    def on(self, executor: Executor) -> list[Any]:
        held = self._pass(executor)
        while held:
            self._alone(held)
            if not self._waiting:
                break
            with self._again() as fresh:
                held = self._pass(fresh)
        if self._failed:
            raise self._failed[min(self._failed)]
        return [self._results[number] for number in range(len(self._items))]

    def _pass(self, executor: Executor) -> list[int]:
        """Hand out what waits; the items that a worker which ended may have held, empty if none did."""
        out: dict[Future[Any], int] = {}
        held: list[int] = []
        try:
            while (self._waiting and not held) or out:
                while self._waiting and not held and len(out) < WINDOW:
                    number = self._waiting.popleft()
                    try:
                        out[executor.submit(work_on, self._items[number])] = number
                    except BrokenExecutor:
                        held.append(number)
                ready, _ = wait(out, return_when=FIRST_COMPLETED)
                for future in ready:
                    number = out.pop(future)
                    if not self._take(number, future):
                        held.append(number)
                if self._failed:
                    self._waiting.clear()
        except BaseException:
            for future in out:
                future.cancel()
            raise
        return sorted(held)

    def _take(self, number: int, future: Future[Any]) -> bool:
        """Keep a result or an error; False where the worker ended."""
        try:
            self._results[number] = future.result()
        except Exception as error:
            if _is_loss(error):
                return False
            self._failed[number] = error
            return True
        self._done(number)
        return True

    def _alone(self, held: list[int]) -> None:
        """Try each of ``held`` once more with nothing beside it, so that the culprit is known."""
        names = "; ".join(self._items[number].name for number in held)
        self._lost(f"a worker ended unexpectedly; tried once more: {names}")
        with self._again() as fresh:
            for number in held:
                future = fresh.submit(work_on, self._items[number])
                if not self._take(number, future):
                    raise WorkerError(
                        f"{self._items[number].name}: the worker ended on this item twice; it may have run"
                        " out of memory: use fewer workers, or run this item alone to see what happens"
                    )


def _is_loss(error: BaseException) -> bool:
    """Whether ``error`` says that a worker ended: a broken pool, or a cluster that gave an item up."""
    if isinstance(error, BrokenExecutor):
        return True
    cluster = sys.modules.get("distributed")
    return cluster is not None and isinstance(error, cluster.KilledWorker)
