"""One task a processor: as many threads as the linear algebra may use, each with a single-threaded one."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from functools import lru_cache
from typing import TypeVar

from threadpoolctl import ThreadpoolController  # type: ignore[import-untyped]

Result = TypeVar("Result")


def allowed_threads() -> int:
    """Threads that the linear algebra may use now (its environment variables and limits hold here too)."""
    found = [int(library["num_threads"]) for library in _controller().info() if library["user_api"] == "blas"]
    return max(found, default=1)


def share_out(task: Callable[[int, int], Result], most: int) -> list[Result]:
    """Results of ``task(part, parts)`` for every part, in their order.

    There are as many parts as threads allowed, at most ``most``; with one the task runs here. Meanwhile the
    linear algebra of each thread is single-threaded.

    Examples
    --------
    >>> sum(share_out(lambda part, parts: sum(range(part, 10, parts)), 4))
    45
    """
    parts = max(1, min(allowed_threads(), most))
    if parts == 1:
        return [task(0, 1)]
    with _controller().limit(limits=1, user_api="blas"), ThreadPoolExecutor(parts) as pool:
        return list(pool.map(task, range(parts), [parts] * parts))


@lru_cache(maxsize=1)
def _controller() -> ThreadpoolController:
    return ThreadpoolController()
