"""Every texel has one owner, and its weights lead back to its centre."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose
from tangentry.nodes.geometry.texels import image_places, texel_owners


def fan(corners, centre):
    """Triangles from a centre to each side of a closed ring of places."""
    ring = np.asarray(corners, float)
    return np.stack([np.broadcast_to(centre, ring.shape), ring, np.roll(ring, -1, axis=0)], axis=1)


def centres(width, height):
    columns, rows = np.meshgrid((np.arange(width) + 0.5) / width, (np.arange(height) + 0.5) / height)
    return np.stack([columns, rows], axis=-1)


SQUARE = [(0, 0), (1, 0), (1, 1), (0, 1)]


@given(st.tuples(st.integers(1, 31), st.integers(1, 31)), st.booleans())
@settings(max_examples=60, deadline=None)
def test_triangles_that_tile_the_square_own_each_texel_once(centre, mirrored):
    """Centres of 16 x 16 texels at multiples of 1/32: shared edges run through many of them."""
    places = fan(SQUARE, np.array(centre) / 32)[:, :: -1 if mirrored else 1]
    alone = sum((texel_owners(places[k : k + 1], 16, 16).triangle >= 0).astype(int) for k in range(len(places)))

    assert (alone == 1).all()


@given(st.lists(st.tuples(st.floats(0, 1), st.floats(0, 1)), min_size=3, max_size=3))
@settings(max_examples=100, deadline=None)
def test_weights_lead_back_to_the_centre(corners):
    places = np.array([corners])
    owners = texel_owners(places, 23, 17)
    own = owners.triangle >= 0

    one, two = np.moveaxis(owners.weights[own].astype(float), -1, 0)
    reached = np.stack([1 - one - two, one, two], axis=1) @ places[0]
    assert_allclose(reached, centres(23, 17)[own], atol=1e-5)


@given(st.lists(st.tuples(st.floats(-1, 2), st.floats(-1, 2)), min_size=3, max_size=3))
@settings(max_examples=60, deadline=None)
def test_conservative_owners_are_all_that_a_finer_image_finds(corners):
    """Eight times as fine: every texel with a covered centre inside a coarse one makes that one touched."""
    places = np.array([corners])
    fine = texel_owners(places, 8 * 12, 8 * 12).triangle >= 0
    coarse = texel_owners(places, 12, 12, conservative=True).triangle >= 0

    assert not (fine.reshape(12, 8, 12, 8).any(axis=(1, 3)) & ~coarse).any()


def test_a_covered_centre_counts_before_a_touch():
    halves = np.array([[(0, 0), (0.6, 0), (0, 3)], [(0.6, 0), (1, 0), (1, 1)]], float)
    plain, touched = (texel_owners(halves, 7, 7, conservative=flag).triangle for flag in (False, True))

    assert (touched[plain >= 0] == plain[plain >= 0]).all() and (touched >= 0).sum() > (plain >= 0).sum()


def test_rows_in_bands_are_the_rows_of_the_whole():
    places = fan([(0.1, 0.2), (0.9, 0.1), (0.7, 1.3), (-0.4, 0.8)], (0.4, 0.5))
    whole = texel_owners(places, 40, 40)
    bands = [texel_owners(places, 40, 40, rows=(k, k + 10)) for k in range(0, 40, 10)]

    assert (np.concatenate([band.triangle for band in bands]) == whole.triangle).all()


@pytest.mark.parametrize("shift", [(3, 0), (0, -2), (-5, 7)])
def test_uvs_wrap(shift):
    corners = np.array([[(0.25, 0.125), (0.875, 0.25), (0.5, 0.75)]])

    assert (texel_owners(corners + shift, 32, 32).triangle == texel_owners(corners, 32, 32).triangle).all()


def test_v_up_puts_one_at_the_top():
    assert_allclose(image_places(np.array([[0.25, 1.0]]), v_down=False), [[0.25, 0.0]])
    assert_allclose(image_places(np.array([[0.25, 1.0]]), v_down=True), [[0.25, 1.0]])


@pytest.mark.parametrize(
    "corners",
    [
        [(0, 0), (1, 1), (0.5, 0.5)],
        [(0.3, 0.3)] * 3,
        [(np.nan, 0), (1, 0), (1, 1)],
        [(np.inf, 0), (1, 0), (1, 1)],
        [(0, 0), (1e9, 0), (0, 1e9)],
        [(1e12, 0), (1e12 + 1, 0), (1e12, 1)],
    ],
)
def test_what_has_no_place_in_an_image_owns_nothing(corners):
    assert (texel_owners(np.array([corners], float), 8, 8, conservative=True).triangle == -1).all()
