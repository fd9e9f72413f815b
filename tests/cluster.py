"""A scheduler and two workers of a cluster, on loopback."""

from __future__ import annotations

import os
import socket
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager


@contextmanager
def running_cluster() -> Iterator[str]:
    """A scheduler and two workers on loopback; the scheduler gives an item up when its worker dies."""
    path = os.pathsep.join(p for p in sys.path if p)
    environment = os.environ | {"PYTHONPATH": path, "DASK_DISTRIBUTED__SCHEDULER__ALLOWED_FAILURES": "0"}

    def start(*words: str) -> subprocess.Popen[bytes]:
        quiet = {"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL}
        command = [sys.executable, "-W", "ignore", "-m", "distributed.cli." + words[0], *words[1:]]
        return subprocess.Popen(command, env=environment, **quiet)  # type: ignore[call-overload,no-any-return]

    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        port = probe.getsockname()[1]
    address = f"tcp://127.0.0.1:{port}"
    scheduler = start("dask_scheduler", "--host", "127.0.0.1", "--port", str(port), "--no-dashboard")
    worker = (
        "dask_worker",
        address,
        "--host",
        "127.0.0.1",
        "--nthreads",
        "1",
        "--no-nanny",
        "--no-dashboard",
    )
    workers = [start(*worker) for _ in range(2)]
    try:
        yield address
    finally:
        for process in (*workers, scheduler):
            process.terminate()
            process.wait()
