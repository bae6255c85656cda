"""Work on many points in blocks, on all cores.

The kernels release the interpreter's lock, so plain threads serve. Compiled parallel loops would take half as long
again to compile, must not be entered from two threads, and break processes that fork. Every point is worked on by
itself or with the same neighbours: results do not depend on the number of threads.
"""

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from functools import cache

import numba

BLOCK = 64  # points that a kernel may work on side by side: blocks begin at multiples of it
SMALL = 1024  # points: fewer are not worth a thread
PER_THREAD = 4  # blocks for each thread, so that none waits long for the slowest


def in_blocks(work: Callable[[slice], None], n: int, small: int = SMALL, multiple: int = BLOCK) -> None:
    """Call ``work`` with slices that cover range(n), several at a time.

    As many threads as numba would use (NUMBA_NUM_THREADS, else the cores of the process); an exception in one of
    the blocks is raised.
    """
    threads = int(numba.config.NUMBA_NUM_THREADS)  # type: ignore[attr-defined]
    if n <= small or threads == 1:
        work(slice(0, n))
        return
    size = max(-(-n // (PER_THREAD * threads)), -(-small // PER_THREAD))
    size = -(-size // multiple) * multiple
    list(_pool(threads).map(work, [slice(start, min(start + size, n)) for start in range(0, n, size)]))


@cache
def _pool(threads: int) -> ThreadPoolExecutor:
    """Threads that are kept, since starting them costs as much as some hundred points."""
    return ThreadPoolExecutor(threads, thread_name_prefix="wellshed")


if hasattr(os, "register_at_fork"):  # a child has none of its parent's threads
    os.register_at_fork(after_in_child=_pool.cache_clear)
