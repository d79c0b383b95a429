from functools import cache

import numpy as np
import pytest

from muntin.lab import bench_grid, draw_lab
from muntin.lab.drawing import _has_shape

KINDS = ["elution", "mixed mode", "island"]
SHARES = {"elution": (0.1, 0.6), "mixed mode": (0.1, 0.6), "island": (0.05, 0.4)}
PH, SALT = np.linspace(4.5, 7.5, 31), np.linspace(50.0, 500.0, 46)


@cache
def drawn(kind):
    rng = np.random.default_rng(11)
    return [draw_lab(rng, kind) for _ in range(4)]


def surface(lab, ph=PH, salt=SALT):
    conditions = [[p, s] for p in ph for s in salt]
    return lab.recovery(conditions).reshape(len(ph), len(salt))


def test_the_bench_sets_tenths_of_ph_and_tens_of_salt():
    grid = bench_grid()
    assert grid.shape == (31 * 46, 2)
    assert grid[:46, 1] == pytest.approx(SALT)
    assert grid[::46, 0] == pytest.approx(PH)


@pytest.mark.parametrize("kind", KINDS)
def test_the_stated_share_of_the_grid_passes_with_room_above(kind):
    for lab in drawn(kind):
        truth = surface(lab)
        assert SHARES[kind][0] <= np.mean(truth >= 0.8) <= SHARES[kind][1]
        assert truth.max() >= 0.9


@pytest.mark.parametrize("kind", KINDS)
def test_share_target_and_room_can_be_chosen(kind):
    rng = np.random.default_rng(11)
    truth = surface(draw_lab(rng, kind, target=0.7, share=(0.22, 0.3), room=0.24))
    assert 0.22 <= np.mean(truth >= 0.7) <= 0.3
    assert truth.max() >= 0.94


def test_plain_elution_falls_nowhere_as_ph_or_salt_rises():
    for lab in drawn("elution"):
        truth = surface(lab)
        assert lab.binding.hydrophobic is None
        assert np.diff(truth, axis=0).min() > -1e-9
        assert np.diff(truth, axis=1).min() > -1e-9


def test_a_surface_that_falls_anywhere_is_no_plain_elution():
    lab = drawn("elution")[0]
    rising = surface(lab)
    assert _has_shape("elution", rising.ravel(), lab, 0.8)
    for place in [(10, 0), (30, 20), (0, 45)]:
        dented = rising.copy()
        dented[place] += 0.3 if place[1] == 0 else -0.3
        assert not _has_shape("elution", dented.ravel(), lab, 0.8)


def test_mixed_mode_has_its_best_salt_inside_the_range():
    for lab in drawn("mixed mode"):
        passing = surface(lab) >= 0.8
        inside = [row.any() and not row[0] and not row[-1] for row in passing]
        assert any(inside)
        row = surface(lab)[int(np.argmax(inside))]
        best = int(np.argmax(row))
        assert np.all(np.diff(row[: best + 1]) > 0)
        assert np.all(np.diff(row[best:]) < 0)


def test_an_island_is_shut_on_all_sides():
    rim_ph, rim_salt = np.linspace(4.5, 7.5, 121), np.linspace(50.0, 500.0, 181)
    for lab in drawn("island"):
        sides = surface(lab, [4.5, 7.5], rim_salt), surface(lab, rim_ph, [50.0, 500.0])
        assert max(side.max() for side in sides) < 0.8
        assert surface(lab).max() >= 0.9


def test_the_same_seed_draws_the_same_lab():
    first, again, other = (draw_lab(np.random.default_rng(s), "island") for s in (3, 3, 4))
    assert first == again != other


def test_gives_up_after_the_stated_tries():
    class Counting(np.random.Generator):
        procedures = 0

        def integers(self, *args, **keys):
            self.procedures += 1
            return super().integers(*args, **keys)

    rng = Counting(np.random.PCG64(1))
    message = (
        "no island lab of 3 drawn has 99% to 100% of the range at 0.8 or above and its best 0.1 "
        "above: widen the share, or lower target or room"
    )
    with pytest.raises(RuntimeError) as caught:
        draw_lab(rng, "island", share=(0.99, 1.0), tries=3)
    assert str(caught.value) == message
    assert rng.procedures == 3


def test_other_kinds_and_shares_that_are_none_are_refused():
    rng = np.random.default_rng(1)
    with pytest.raises(ValueError, match="'ring' is none of elution, mixed mode, island"):
        draw_lab(rng, "ring")
    with pytest.raises(ValueError, match=r"a share cannot lie between 0\.5 and 0\.2"):
        draw_lab(rng, "elution", share=(0.5, 0.2))
