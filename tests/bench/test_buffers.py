"""Recipes: what they hold, what they say, and why there is none."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.bench.buffer.stocks import named_stocks
from muntin.bench.buffers import buffer_made, buffer_recipe
from muntin.bench.recipe import Recipe, Refusal
from muntin.record.definition import Definition
from tests.bench.buffered import PH, SALT, SUGAR, buffer, buffered
from tests.studies import RECOVERY, tables

ACETATE = buffered(buffer("acetate"), temperature_c=25.0)
BOTH = buffered(buffer("acetate"), buffer("phosphate", mm=30.0, stock_mm=300.0))


def at(definition, ph, salt=0.0):
    return buffer_recipe(definition, {"ph": ph, "salt": salt})


# What a recipe holds.


def test_acetate_by_hand():
    # 25 °C, 20 mM, pH 4.756 - g: half of the acetic acid has lost its proton, and what sodium does
    # not balance is H+: 10 mM - 10^(g - pH). I = 10 mM, g = 0.51081 (0.1/1.1 - 0.003) = 0.0449.
    g = 0.51081 * (0.1 / 1.1 - 0.003)
    ph = 4.756 - g
    sodium = 10.0 - 1000 * 10 ** (g - ph)
    recipe = at(ACETATE, ph)
    assert recipe.parts["sodium acetate 200 mM"] == pytest.approx(sodium / 200, abs=1e-5)
    assert recipe.parts["acetic acid 200 mM"] == pytest.approx((20 - sodium) / 200, abs=1e-5)
    assert recipe.parts["water"] == pytest.approx(0.9, abs=1e-12)
    assert "NaCl 2000 mM" not in recipe.parts


@settings(deadline=None, derandomize=True)
@given(st.floats(3.7, 8.0), st.floats(0.0, 300.0))
def test_volumes_add_up_and_hold_what_was_asked(ph, salt):
    recipe = at(BOTH, ph, salt)
    assert isinstance(recipe, Recipe)
    assert min(recipe.parts.values()) > 0.0
    assert math.fsum(recipe.parts.values()) == pytest.approx(1.0, abs=1e-12)
    acetate = recipe.parts["acetic acid 200 mM"] + recipe.parts["sodium acetate 200 mM"]
    phosphate = recipe.parts["NaH2PO4 300 mM"] + recipe.parts["Na2HPO4 300 mM"]
    assert [200 * acetate, 300 * phosphate] == pytest.approx([20.0, 30.0], abs=1e-6)
    made = buffer_made(BOTH, recipe.parts)
    assert made.ph == pytest.approx(ph, abs=1e-6)
    assert made.salt == pytest.approx(salt, abs=1e-5)


@settings(deadline=None, derandomize=True)
@given(st.floats(3.7, 5.6), st.floats(0.05, 0.5))
def test_more_of_the_base_form_is_a_higher_ph(ph, more):
    one, other = at(BOTH, ph, 100.0).parts, at(BOTH, ph + more, 100.0).parts
    assert other["sodium acetate 200 mM"] > one["sodium acetate 200 mM"]
    assert other["acetic acid 200 mM"] < one["acetic acid 200 mM"]
    assert other["NaCl 2000 mM"] == pytest.approx(one["NaCl 2000 mM"], rel=1e-9)


def test_amounts_of_any_unit_come_out_alike():
    parts = at(BOTH, 5.5, 120.0).parts
    ul = {name: 450.0 * share for name, share in parts.items()}
    made, again = buffer_made(BOTH, parts), buffer_made(BOTH, ul)
    assert (again.ph, again.salt) == pytest.approx((made.ph, made.salt), rel=1e-9)


def test_only_the_buffers_of_a_ph_are_used():
    two = buffered(buffer("acetate", below_ph=5.8), buffer("MES", from_ph=5.8))
    assert {*at(two, 5.7).parts} == {"acetic acid 200 mM", "sodium acetate 200 mM", "water"}
    assert {*at(two, 5.8).parts} == {"MES 200 mM", "sodium MES 200 mM", "water"}


def test_a_salt_in_mol_per_litre():
    molar = buffered(
        buffer("acetate"), factors=(PH, {**SALT, "unit": "M", "high": 1, "step": 0.01})
    )
    parts = at(molar, 5.0, 0.25).parts
    assert parts == pytest.approx(dict(at(buffered(buffer("acetate")), 5.0, 250.0).parts))
    assert buffer_made(molar, parts).salt == pytest.approx(0.25)


def test_sulfate_counts_more_than_chloride():
    sulfate = buffered(buffer("acetate"), salt_kind="Na2SO4")
    assert "Na2SO4 2000 mM" in at(sulfate, 5.0, 100.0).parts
    strength = buffer_made(sulfate, at(sulfate, 5.0, 100.0).parts).strength
    chloride = buffered(buffer("acetate"))
    plain = buffer_made(chloride, at(chloride, 5.0, 100.0).parts).strength
    # 100 mM: 3 times 0.1 against 0.1; the acetate differs by its own small shift.
    assert strength - plain == pytest.approx(0.2, abs=5e-4)


def test_the_names_on_the_bottles_are_the_users():
    own = buffered(buffer("acetate", acid_stock="HAc", base_stock="NaAc"), salt_stock="brine")
    assert {*at(own, 5.0, 50.0).parts} == {"HAc", "NaAc", "brine", "water"}


def test_buffers_may_share_two_bottles():
    names = {"acid_stock": "acid mix", "base_stock": "base mix"}
    one = buffered(buffer("acetate", **names), buffer("MES", mm=10.0, stock_mm=100.0, **names))
    apart = buffered(buffer("acetate"), buffer("MES", mm=10.0, stock_mm=100.0))
    shared, each = at(one, 5.5, 100.0).parts, at(apart, 5.5, 100.0).parts
    assert shared["acid mix"] == pytest.approx(each["acetic acid 200 mM"], abs=1e-12)
    assert shared["base mix"] == pytest.approx(each["sodium MES 100 mM"], abs=1e-12)
    assert shared["acid mix"] + shared["base mix"] == pytest.approx(0.1)
    assert math.fsum(shared.values()) == pytest.approx(1.0)
    assert buffer_made(one, shared).ph == pytest.approx(5.5, abs=1e-6)


def test_stocks_with_names_of_their_own_are_explained():
    names = {"acid_stock": "acid mix", "base_stock": "base mix"}
    own = buffered(buffer("acetate", **names), buffer("MES", **names), salt_stock="brine")
    assert named_stocks(own.bench) == (
        "acid mix: acetic acid 200 mM, MES 200 mM",
        "base mix: sodium acetate 200 mM, sodium MES 200 mM",
        "brine: NaCl 2000 mM",
    )
    assert named_stocks(BOTH.bench) == ()


def test_a_buffer_of_the_users_own():
    # Imidazole (pK 6.993, -0.0215 per °C): at 37 °C its pK is some 0.25 lower.
    keys = {"pka": (6.993,), "charge": 1}
    flat = buffered(buffer("imidazole", **keys), temperature_c=37.0)
    sloping = buffered(buffer("imidazole", pka_per_c=(-0.0215,), **keys), temperature_c=37.0)
    made = [buffer_made(d, at(flat, 7.0, 50.0).parts).ph for d in (flat, sloping)]
    assert made[0] == pytest.approx(7.0, abs=1e-6)
    assert made[1] == pytest.approx(7.0 - 0.25, abs=0.01)
    assert "imidazole acid form 200 mM" in at(flat, 7.0).parts


def test_stocks_of_a_buffer_of_the_users_own_need_not_be_its_ends():
    # Citrate as mono- and disodium salts reaches less than citric acid and trisodium citrate.
    pka = (3.128, 4.761, 6.396)
    own = buffered(buffer("citrates", pka=pka, stock_charges=(-1, -2)), temperature_c=25.0)
    assert isinstance(at(own, 5.0), Recipe)
    assert isinstance(at(own, 6.5), Refusal)
    assert isinstance(at(buffered(buffer("citrate")), 6.5), Recipe)


# What a recipe says.


def test_below_half_molar_it_says_what_it_is_meant_for():
    (said,) = at(BOTH, 5.5, 100.0).remarks
    assert said == "meant for pH 5.5 at 22 °C; ionic strength 0.15"


def test_above_half_molar_no_ph_is_predicted():
    recipe = at(ACETATE, 5.0, 600.0)
    assert recipe.remarks == (
        "titrate to pH 5.0 from these volumes: ionic strength 0.61, no pH predicted",
    )
    assert buffer_made(ACETATE, recipe.parts).ph is None
    assert buffer_made(ACETATE, at(ACETATE, 5.0, 400.0).parts).ph == pytest.approx(5.0, abs=1e-6)


def test_far_from_its_pka_a_buffer_is_pointed_out():
    (_, said) = at(ACETATE, 5.8, 50.0).remarks
    # pKa 4.756 - g at I = 0.069: g = 0.51081 (0.2080 - 0.0207) = 0.0957.
    assert said == (
        "pH 5.8 lies 1.14 above the nearest pKa of acetate, 4.66 in this liquid: beyond 1 it "
        "hardly holds the pH"
    )
    assert len(at(ACETATE, 5.6, 50.0).remarks) == 1
    (_, low) = at(ACETATE, 3.6, 50.0).remarks
    # I = 0.052: g = 0.0870, pKa 4.669.
    assert low.startswith("pH 3.6 lies 1.07 below the nearest pKa of acetate, 4.67 ")


def test_factors_that_come_on_top_are_named():
    sugared = buffered(buffer("acetate"), factors=(PH, SALT, SUGAR))
    recipe = buffer_recipe(sugared, {"ph": 5.0, "salt": 50.0, "sugar": 100.0})
    assert recipe.remarks[-1] == "sugar on top: neither in the volumes nor in the pH"
    without = buffer_recipe(sugared, {"ph": 5.0, "salt": 50.0, "sugar": 0})
    assert without.remarks == recipe.remarks[:-1]


# Why there is none.


def test_a_study_without_buffers_has_no_recipes():
    bare = Definition.model_validate(tables(factors=(PH, SALT), responses=[RECOVERY]))
    assert at(bare, 5.0) is None
    assert buffer_recipe(ACETATE, {"salt": 50.0}) is None


def test_beyond_both_forms():
    refusal = at(buffered(buffer("Tris")), 5.0 - 1.0, 100.0)
    assert refusal.reason.startswith(
        "lies beyond what the forms of Tris reach with 100 mM of salt: pH 5."
    )
    low, high = map(float, refusal.reason.rsplit("pH ", 1)[1].split(" to "))
    tris = buffered(buffer("Tris"))
    assert isinstance(at(tris, low + 0.01, 100.0), Recipe)
    assert isinstance(at(tris, high - 0.01, 100.0), Recipe)
    assert isinstance(at(tris, low - 0.01, 100.0), Refusal)
    assert isinstance(at(tris, high + 0.01, 100.0), Refusal)


def test_where_no_buffer_is_used():
    gap = buffered(buffer("acetate", below_ph=5.6), buffer("phosphate", from_ph=6.0))
    assert at(gap, 5.8) == Refusal(
        reason="lies where no buffer is used: acetate below pH 5.6, phosphate from pH 6"
    )


def test_stocks_that_take_more_than_the_volume():
    refusal = at(ACETATE, 5.0, 1900.0)
    assert refusal.reason.startswith("takes more than 1 L of stocks for 1 L: ")
    assert "950 mL of NaCl 2000 mM" in refusal.reason
    assert isinstance(at(ACETATE, 5.0, 1800.0), Recipe)


def test_a_strange_bottle_is_no_stock():
    with pytest.raises(KeyError, match="no stock of a buffer: lemonade"):
        buffer_made(ACETATE, {"lemonade": 1.0})
