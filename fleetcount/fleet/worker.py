"""The process that counts for a local fleet: `python -m fleetcount.fleet.worker`, spoken to over standard input.

First line: what to prepare and how many threads. Second line: the address of the scheduler. After that `stop` raises
the stop flag. When standard input ends, the coordinator has gone, and so goes this process, at once.
"""

from __future__ import annotations

import asyncio
import json
import logging
import os
import queue
import signal
import sys
import threading
from typing import Any

from fleetcount.fleet.work import STOP


def main() -> None:
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    lines: queue.SimpleQueue[bytes] = queue.SimpleQueue()
    threading.Thread(target=_listen, args=(lines,), daemon=True).start()
    plan = json.loads(lines.get())
    _prepare(plan)
    address = json.loads(lines.get())
    asyncio.run(_serve(address, plan["threads"], plan["name"]))


def _listen(lines: queue.SimpleQueue[bytes]) -> None:
    for line in sys.stdin.buffer:
        if line.strip() == b"stop":
            STOP.up = True
        else:
            lines.put(line)
    os._exit(0)


def _prepare(plan: dict[str, Any]) -> None:
    """Compile or load the kernels before anything is handed out; imports go on meanwhile in this one thread."""
    from fleetcount.methods import registry
    from fleetcount.series.definition import from_canonical

    series = from_canonical(plan["series"], plan["written"])
    registry.get(plan["method"]).prepare(series, range(plan["top"] + 1))


async def _serve(address: str, threads: int, name: str) -> None:
    from distributed import Worker

    logging.getLogger("distributed").setLevel(logging.CRITICAL)
    worker = await Worker(
        address,
        nthreads=threads,
        name=name,
        memory_limit=0,
        host="127.0.0.1",
        dashboard_address="127.0.0.1:0",
        dashboard=False,
        death_timeout=30,
    )

    def leave() -> None:
        STOP.up = True
        asyncio.get_running_loop().call_later(0.5, lambda: asyncio.ensure_future(worker.close()))

    if sys.platform != "win32":
        asyncio.get_running_loop().add_signal_handler(signal.SIGTERM, leave)
    await worker.finished()


if __name__ == "__main__":
    main()
