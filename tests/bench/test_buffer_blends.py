"""Wells between two bottles of one pH and unlike salt."""

import pytest

from muntin.bench.buffer_blends import Blend, blend_cautions, blend_of
from muntin.bench.buffers import buffer_made, buffer_recipe
from tests.bench.buffered import buffer, buffered

PHOSPHATE = buffered(buffer("phosphate"), temperature_c=25.0)


def bottles(definition, ph, *salts):
    return {f"{s} mM": buffer_recipe(definition, {"ph": ph, "salt": s}) for s in salts}


def test_a_blend_holds_what_its_bottles_hold():
    makings = bottles(PHOSPHATE, 7.0, 50.0, 400.0)
    parts = blend_of(7.0, {"50.0 mM": 0.8, "400.0 mM": 0.2}, makings).parts
    assert sum(parts.values()) == pytest.approx(1.0)
    assert parts["NaCl 2000 mM"] == pytest.approx((0.8 * 50 + 0.2 * 400) / 2000)
    assert buffer_made(PHOSPHATE, parts).salt == pytest.approx(120.0)


def test_phosphate_comes_out_lower_and_tris_higher():
    # The pK of both bend with the ionic strength, that of phosphate three times as much downwards.
    for name, ph, side in (("phosphate", 7.0, "below"), ("Tris", 8.0, "above")):
        definition = buffered(buffer(name), temperature_c=25.0)
        makings = bottles(definition, ph, 0.0, 400.0)
        between = blend_of(ph, {"0.0 mM": 0.7, "400.0 mM": 0.3}, makings)
        (said,) = blend_cautions(definition, [between])
        off = abs(buffer_made(definition, between.parts).ph - ph)
        assert said == (
            f"wells between bottles of unlike salt come out up to {off:.2f} {side} the pH of the "
            f"bottles (pH {ph}, salt 120 mM): measure one of them"
        )


def test_the_worst_of_several_blends_is_named():
    makings = bottles(PHOSPHATE, 7.0, 0.0, 400.0)
    blends = [
        blend_of(7.0, {"0.0 mM": 1 - share, "400.0 mM": share}, makings)
        for share in (0.01, 0.3, 0.95)
    ]
    (said,) = blend_cautions(PHOSPHATE, blends)
    assert "salt 120 mM" in said


def test_bottles_as_they_are_and_bottles_of_like_salt_need_no_word():
    makings = bottles(PHOSPHATE, 7.0, 300.0, 400.0)
    half = blend_of(7.0, {"300.0 mM": 0.5, "400.0 mM": 0.5}, makings)
    whole = blend_of(7.0, {"300.0 mM": 1.0}, makings)
    assert blend_cautions(PHOSPHATE, [half, whole]) == ()
    assert blend_cautions(PHOSPHATE, []) == ()


def test_what_is_not_predicted_is_passed_over():
    makings = bottles(PHOSPHATE, 7.0, 0.0, 1000.0)
    assert blend_cautions(PHOSPHATE, [Blend(7.0, makings["1000.0 mM"].parts)]) == ()


def test_a_bottle_without_a_recipe_is_no_blend():
    makings = bottles(PHOSPHATE, 7.0, 0.0)
    assert blend_of(7.0, {"0.0 mM": 0.5, "mine": 0.5}, makings) is None
