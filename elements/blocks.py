"""Work on many points in blocks, on all cores.

The kernels release the interpreter's lock, so plain threads serve. Compiled parallel loops would take half as long
again to compile, must not be entered from two threads, and break processes that fork. Every point is worked on by
itself: results do not depend on the number of threads.
"""

from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor

import numba

SMALL = 256  # points: fewer are not worth a thread (starting some costs as much as evaluating about a hundred)
PER_THREAD = 4  # blocks for each thread, so that none waits long for the slowest


def in_blocks(work: Callable[[slice], None], n: int, small: int = SMALL) -> None:
    """Call ``work`` with slices that cover range(n), several at a time.

    As many threads as numba would use (NUMBA_NUM_THREADS, else the cores of the process); an exception in one of
    the blocks is raised.
    """
    threads = int(numba.config.NUMBA_NUM_THREADS)  # type: ignore[attr-defined]
    if n <= small or threads == 1:
        work(slice(0, n))
        return
    size = max(-(-n // (PER_THREAD * threads)), -(-small // PER_THREAD))
    with ThreadPoolExecutor(threads) as pool:
        list(pool.map(work, [slice(start, min(start + size, n)) for start in range(0, n, size)]))
