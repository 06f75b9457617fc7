"""Pricing groups side by side on this machine.

Threads, because the time goes into compiled kernels that release the interpreter: nothing
is copied, and nothing has to start up.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

from threadpoolctl import threadpool_limits

from pricer.core.progress import Progress

Item = TypeVar("Item")
Result = TypeVar("Result")


def map_groups(
    work: Callable[[Item], Result],
    items: Sequence[Item],
    *,
    workers: int,
    progress: Progress,
    label: Callable[[Item], str],
) -> list[Result]:
    """``[work(item) for item in items]``, in that order, on ``workers`` threads.

    Linear algebra is held to one thread a worker. The first exception is raised after the
    work in hand is done.
    """

    def one(item: Item) -> Result:
        result = work(item)
        progress.advance(label(item))
        return result

    progress.start(len(items))
    try:
        with threadpool_limits(limits=1), ThreadPoolExecutor(workers) as pool:
            return list(pool.map(one, items))
    finally:
        progress.finish()
