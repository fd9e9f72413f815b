"""A study of every state asked for, here or on workers, with a bar on a terminal."""

from __future__ import annotations

import argparse
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any

from seqfault.cli.options import read_states
from seqfault.cli.progress import bar
from seqfault.errors import RequestError

if TYPE_CHECKING:
    from concurrent.futures import Executor

    from seqfault.case.records import Case
    from seqfault.faults.network import Network


def add_workers(parser: argparse.ArgumentParser) -> None:
    """--workers and --scheduler."""
    group = parser.add_argument_group("where the work is done, with --scenario all")
    either = group.add_mutually_exclusive_group()
    either.add_argument(
        "--workers", metavar="N", type=_workers, default=1, help="so many processes (default: 1, this one)"
    )
    either.add_argument(
        "--scheduler",
        metavar="ADDRESS",
        help="a Dask cluster, as in tcp://host:8786 (needs seqfault[cluster])",
    )


def _workers(text: str) -> int:
    try:
        count = int(text)
    except ValueError:
        count = 0
    if not 1 <= count <= 1024:
        raise argparse.ArgumentTypeError(f'"{text}": a whole number of processes, 1 to 1024')
    return count


def over_states(
    options: argparse.Namespace, study: Callable[..., Any], *arguments: Any, place: str | None = None
) -> list[tuple[Network, Any]]:
    """``study(network, *arguments)`` of each state asked for, with its network.

    With several states, those that have ``place`` in service.
    """
    from seqfault.studies.batch import Item, run_batch

    items = [
        Item(case, with_network, (study, arguments), options.machine)
        for case in _having(read_states(options), place)
    ]
    if len(items) == 1:
        return run_batch(items)
    from seqfault.cli.run import say

    with bar("states", len(items)) as done, _executor(options) as (executor, again):
        return run_batch(items, executor, done=done, lost=say, again=again)


def with_network(
    network: Network, study: Callable[..., Any], arguments: tuple[Any, ...]
) -> tuple[Network, Any]:
    """What ``study`` finds, and the network, which travels without its factors."""
    return network, study(network, *arguments)


def _having(cases: list[Case], place: str | None) -> list[Case]:
    if place is None:
        return cases
    from seqfault.case.places import read_place

    if len(cases) == 1:
        read_place(cases[0], place)
        return cases
    from seqfault.cli.run import say

    having, without = [], []
    for case in cases:
        try:
            read_place(case, place)
            having.append(case)
        except RequestError:
            without.append(case)
    if not having:
        read_place(cases[0], place)
    for case in without:
        say(f"state {case.state}: the place is out of service there; no answer for it")
    return having


@contextmanager
def _executor(options: argparse.Namespace) -> Iterator[tuple[Executor | None, Callable[[], Executor]]]:
    """The executor asked for, None for this process, and what makes another one when it breaks."""
    from functools import partial

    from seqfault.studies.batch import new_pool

    if options.scheduler is not None:
        with _cluster(options.scheduler) as connect:
            yield connect(), connect
        return
    fresh = partial(new_pool, options.workers)
    if options.workers == 1:
        yield None, fresh
        return
    try:
        with fresh() as pool:
            try:
                yield pool, fresh
            except BaseException:
                pool.shutdown(wait=False, cancel_futures=True)
                _end_children()
                raise
    finally:
        _end_children()


def _end_children() -> None:
    """End what is left of our own pools; an interrupted command does not wait for its workers."""
    from multiprocessing import active_children

    for child in active_children():
        child.terminate()


@contextmanager
def _cluster(address: str) -> Iterator[Callable[[], Executor]]:
    try:
        import distributed
    except ImportError:
        raise RequestError(
            '--scheduler needs Dask: install it with pip install "seqfault[cluster]"'
        ) from None
    try:
        client = distributed.Client(address, timeout="10s", set_as_default=False)
    except Exception as error:  # a client that finds nothing raises many kinds
        raise RequestError(
            f"--scheduler {address}: no scheduler answers there; as in tcp://host:8786"
        ) from error
    with client:
        yield lambda: client.get_executor(pure=False)
