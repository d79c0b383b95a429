"""Moves of the posterior mean in one factorisation, against updating well by well."""

import numpy as np
import pytest

from muntin.design.moves import moves
from muntin.design.outlook import Outlook
from tests.design.surfaces import points, surface

JUDGED = points(23, 40)
CANDIDATES = points(20, 41)
WELLS = [3, 8, 3, 15, 0, 8, 11]
PLATE = np.arange(20) // 10
STOCK = np.arange(20) % 3


def outlook(kind):
    posterior = surface(kind)
    scale = (PLATE,) if kind == "fraction" else ()
    setting = np.full((20, 2), 0.03)
    none = np.zeros(0, dtype=np.intp)
    return Outlook(posterior, JUDGED, CANDIDATES, (STOCK,), scale, none, setting)


@pytest.mark.parametrize("kind", ["fraction", "positive", "real"])
def test_first_wells_explain_what_picking_them_explains(kind):
    ahead = outlook(kind)
    U = moves(ahead, JUDGED, WELLS)
    assert U.shape == (len(ahead.surface.weights), 23, 7)
    for k, well in enumerate(WELLS, start=1):
        ahead.pick(well)
        np.testing.assert_allclose(
            (U[:, :, :k] ** 2).sum(2), ahead.explained, rtol=1e-8, atol=1e-12
        )


def test_other_points_than_the_judged_ones():
    ahead = outlook("fraction")
    every = moves(ahead, JUDGED, WELLS)
    np.testing.assert_allclose(moves(ahead, JUDGED[5:9], WELLS), every[:, 5:9], rtol=1e-10)
