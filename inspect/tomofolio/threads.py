"""Kernels on all cores by plain threads."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

from numba import get_num_threads


def over_parts(work: Callable[[slice], None], count: int, size: int) -> None:
    """Call ``work`` for stretches of ``range(count)`` on as many threads as numba is told to use.

    Plain threads over kernels that let go of the interpreter lock: compiles in a third of the time of a parallel
    kernel, and what each stretch writes does not depend on who runs it.
    """
    parts = [slice(first, min(first + size, count)) for first in range(0, count, size)]
    threads = min(get_num_threads(), len(parts))
    if threads < 2:
        for part in parts:
            work(part)
        return
    work(parts[0])  # the first call may compile; two threads must not do that twice
    with ThreadPoolExecutor(max_workers=threads) as pool:
        for _ in pool.map(work, parts[1:]):
            pass
