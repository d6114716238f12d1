"""How the kernels are compiled: once, kept on disk, and without the interpreter lock.

A kernel takes and fills arrays, allocates little and knows no Python objects, so that several of them
can run in threads at the same time. Results never depend on the number of threads: every task writes
its own part of the output.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import Any, TypeVar, cast

import numba

Kernel = TypeVar("Kernel", bound=Callable[..., Any])


def compiled(function: Kernel) -> Kernel:
    """Compile ``function`` at its first call and keep the machine code for later processes.

    The kept code is renewed when the file of the function changes, not when a kernel it calls in another file
    does: after such a change, delete ``*.nbi`` and ``*.nbc`` in ``__pycache__``.
    """
    # No kernel is called from C; the wrapper for that would take a fifth of the time to compile.
    return cast("Kernel", numba.njit(cache=True, nogil=True, no_cfunc_wrapper=True)(function))


def available_threads() -> int:
    """Cores this process may use (``NUMBA_NUM_THREADS`` lowers it)."""
    return int(numba.config.NUMBA_NUM_THREADS)


def run_tasks(tasks: Sequence[Callable[[], None]], threads: int | None = None) -> None:
    """Run independent tasks, in threads where that helps; the first failure is raised.

    Parameters
    ----------
    tasks
        Calls without arguments that write to separate parts of an output.
    threads
        Threads to use; None takes the cores of this process.
    """
    workers = min(len(tasks), available_threads() if threads is None else threads)
    if workers <= 1:
        for task in tasks:
            task()
        return
    with ThreadPoolExecutor(max_workers=workers) as pool:
        for done in [pool.submit(task) for task in tasks]:
            done.result()
