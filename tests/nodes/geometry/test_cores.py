"""Work shared out is work done, once each."""

from __future__ import annotations

import os

import numpy as np
import pytest
from tangentry.nodes.geometry.cores import share_out, shared_zeros


@pytest.mark.parametrize("count", [0, 1, 2, 7])
def test_every_number_is_worked_on_once(count):
    done = shared_zeros((count,), np.int32)

    def work(number: int) -> None:
        done[number] += 1

    share_out(work, count)
    assert (done == 1).all()


def test_an_error_in_any_process_is_raised_here():
    def work(number: int) -> None:
        if number == 3:
            raise ValueError("three")

    with pytest.raises(ValueError, match="three"):
        share_out(work, 4)


def test_a_process_that_dies_leaves_nothing_undone():
    here = os.getpid()
    done = shared_zeros((6,), np.int32)

    def work(number: int) -> None:
        if os.getpid() != here:
            os._exit(9)
        done[number] = 1

    share_out(work, 6)
    assert done.all()
