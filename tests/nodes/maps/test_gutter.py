"""The gutter is filled from the nearest owner."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose
from tangentry.nodes.maps.gutter import nearest_owned


@pytest.mark.parametrize("share", [0.002, 0.05, 0.5])
def test_no_owned_texel_is_much_nearer_than_the_one_found(share):
    """Against a search through all owners; the sweeps may miss by a fraction of a texel."""
    owned = np.random.default_rng(0).random((60, 70)) < share
    r, c = np.indices(owned.shape)
    found = nearest_owned(owned, 1000)
    length = np.hypot(found // 70 - r, found % 70 - c)
    best = np.hypot(r[..., None] - np.nonzero(owned)[0], c[..., None] - np.nonzero(owned)[1]).min(axis=-1)

    assert owned.ravel()[found].all()
    assert_allclose(length, best, atol=0.3)


def test_an_owned_texel_is_its_own():
    owned = np.eye(9, dtype=bool)

    assert (nearest_owned(owned, 3)[owned] == np.nonzero(owned.ravel())[0]).all()


def test_beyond_its_reach_nothing_is_filled():
    owned = np.zeros((1, 11), bool)
    owned[0, 5] = True

    assert (nearest_owned(owned, 2)[0] >= 0).tolist() == [False] * 3 + [True] * 5 + [False] * 3


def test_without_owners_nothing_is_found():
    assert (nearest_owned(np.zeros((4, 5), bool), 9) == -1).all()
