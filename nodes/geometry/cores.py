"""Work shared out over the cores of this machine.

The work is a function of a number; what it finds it writes into shared arrays. On Linux each core gets a process forked
from this one, which sees all its memory as it is, ray structures included, so nothing is sent or built twice.
Elsewhere, and inside a process that is itself one of several workers, the same calls run one after another.
"""

from __future__ import annotations

import mmap
import multiprocessing
import os
import sys
import warnings
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from typing import TypeVar

import numpy as np
from numpy.typing import DTypeLike
from tangentry.pipeline.flow import Array

Made = TypeVar("Made")


def shared_zeros(shape: tuple[int, ...], dtype: DTypeLike) -> Array:
    """An array of zeros that processes forked later write to as this one does."""
    count = int(np.prod(shape))
    memory = mmap.mmap(-1, max(1, count * np.dtype(dtype).itemsize))
    return np.frombuffer(memory, dtype, count).reshape(shape)


def core_count() -> int:
    """How many processes are worth their while here."""
    if sys.platform != "linux" or multiprocessing.parent_process() is not None:
        return 1
    return len(os.sched_getaffinity(0))


def in_threads(work: Callable[[int], Made], count: int) -> list[Made]:
    """[work(0), ..., work(count - 1)], at one time: for kernels that let go of the interpreter's lock."""
    if count == 1:
        return [work(0)]
    with ThreadPoolExecutor(count) as pool:
        return list(pool.map(work, range(count)))


def share_out(work: Callable[[int], None], count: int) -> None:
    """Call work(0) ... work(count - 1), each once, in some order; they write into arrays from `shared_zeros`.

    A process that ends badly leaves its share to be done again here, where its error is seen.
    """
    cores = min(core_count(), count)
    children = [(core, _forked(work, range(core, count, cores))) for core in range(1, cores)]
    try:
        for number in range(0, count, max(cores, 1)):
            work(number)
    finally:
        ended = [(core, os.waitpid(pid, 0)[1]) for core, pid in children]
    for core, status in ended:
        if status != 0:
            for number in range(core, count, cores):
                work(number)


def _forked(work: Callable[[int], None], numbers: range) -> int:
    sys.stdout.flush()
    with warnings.catch_warnings():
        # Python 3.12 warns of forking beside threads; the child runs kernels and rays alone, which take no locks.
        warnings.simplefilter("ignore", DeprecationWarning)
        pid = os.fork()
    if pid:
        return pid
    status = 1
    try:
        for number in numbers:
            work(number)
        status = 0
    finally:
        os._exit(status)
