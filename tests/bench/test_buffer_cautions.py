"""Cautions about the buffers of a whole plan."""

import pytest

from muntin.bench.buffer_cautions import buffer_cautions
from tests.bench.buffered import buffer, buffered


def cautions(definition, *conditions):
    return buffer_cautions(definition, [{"ph": ph, "salt": salt} for ph, salt in conditions])


def those_about(said, word):
    return [sentence for sentence in said if word in sentence]


TWO = (buffer("acetate", below_ph=5.8), buffer("MES", from_ph=5.8))


def test_a_buffer_well_inside_its_range_beside_much_salt_needs_no_word():
    assert cautions(buffered(buffer("acetate")), (4.6, 300.0), (5.2, 400.0)) == ()
    assert cautions(buffered(buffer("acetate"))) == ()


def test_a_buffer_that_changes_along_the_ph():
    two = buffered(*TWO)
    (said,) = those_about(cautions(two, (5.0, 300.0), (4.5, 300.0), (6.5, 300.0)), "along the pH")
    assert said == (
        "the buffer changes along the pH (acetate at pH 4.5 to 5.0; MES at pH 6.5): what it does "
        "is read as an effect of the pH. One mix of them over the whole range, without from_ph and "
        "below_ph, parts the two"
    )
    assert not those_about(cautions(two, (5.0, 300.0), (5.4, 300.0)), "along the pH")


def test_one_mix_over_the_whole_range_is_not_confounded():
    mix = buffered(buffer("acetate"), buffer("MES"))
    assert not those_about(cautions(mix, (4.5, 400.0), (6.5, 400.0)), "along the pH")


def test_ions_of_the_buffer_beside_little_salt():
    # At pH 5.756 - g nine in ten of the acetate are ions: 18 mM of sodium beside 50 of NaCl.
    phs = buffered(buffer("acetate"), temperature_c=25.0)
    (said,) = those_about(cautions(phs, (4.7, 300.0), (5.6, 50.0)), "of its own")
    assert said == (
        "the buffer brings 11 to 18 mM of ions of its own, which are not counted as salt and "
        "change with the pH: at pH 5.6 and 50 mM of salt they are 36 % more"
    )


def test_a_buffer_that_holds_the_ph_weakly():
    # pKa 4.756 at 25 °C; Davies at 0.068 mol/L (50 mM of NaCl, 18 of sodium acetate): 0.100 lower.
    phs = buffered(buffer("acetate"), temperature_c=25.0)
    (said,) = those_about(cautions(phs, (4.7, 300.0), (5.6, 50.0)), "weakly")
    assert said == (
        "1 of 2 liquids lies 0.8 to 1 from the nearest pKa of their buffers (pH 5.6: 0.94), where "
        "they hold the pH weakly: measure it in an eluate, too"
    )
    # Within 0.8 it holds it well; what lies beyond 1 is told with its recipe.
    assert not those_about(cautions(phs, (5.4, 50.0), (5.8, 50.0)), "weakly")


def test_ions_of_the_buffer_without_salt():
    (said,) = cautions(buffered(buffer("acetate")), (5.0, 0.0))
    assert said == (
        "the buffer brings 13 mM of ions of its own, which are not counted as salt, in "
        "liquids without salt"
    )


@pytest.mark.parametrize("name", ["acetate", "Tris", "citrate"])
def test_the_buffer_brings_as_much_of_either_charge(name):
    # Sodium and TrisH+ on one side, acetate ions and chloride on the other.
    from muntin.bench.buffer_cautions import _made

    definition = buffered(buffer(name), temperature_c=25.0)
    ph = {"acetate": 5.0, "Tris": 8.0, "citrate": 5.5}[name]
    made = _made(definition, {"ph": ph, "salt": 150.0})
    (couple,) = made.wanted.titration.couples
    counter = made.wanted.titration.liquid(made.base).ions[-1] - 0.150
    negative = 1000 * counter - sum(20.0 * share * min(0, z) for z, share in made.shares(couple))
    assert made.own_mm == pytest.approx(negative, abs=0.02)  # less H+ and OH-


@pytest.mark.parametrize(
    ("name", "ph", "exchanger", "about"),
    [
        ("acetate", 5.0, "cation", None),
        ("phosphate", 7.0, "cation", None),
        ("Tris", 8.0, "anion", None),
        ("Tris", 8.0, None, None),
        ("acetate", 5.0, None, None),
        (
            "Tris",
            8.0,
            "cation",
            "Tris has ions of charge +1 here, which a resin of cation exchange",
        ),
        ("MES", 6.0, "anion", "MES has ions of charge −1 here, which a resin of anion exchange"),
        ("citrate", 6.5, "anion", "citrate has ions of charge −3 here, which a resin of anion"),
        ("phosphate", 7.0, None, "phosphate has ions of charge −2 here: an anion exchanger binds"),
        ("phosphate", 4.5, None, None),
    ],
)
def test_ions_that_the_resin_binds(name, ph, exchanger, about):
    said = cautions(buffered(buffer(name), exchanger=exchanger), (ph, 400.0))
    found = those_about(said, "ions of charge")
    assert [sentence.startswith(about) for sentence in found] == ([] if about is None else [True])


def test_bound_ions_of_several_charges_are_said_to_bind_more_strongly():
    anion = {"exchanger": "anion"}
    (one,) = those_about(cautions(buffered(buffer("MES"), **anion), (6.0, 400.0)), "binds")
    (two,) = those_about(cautions(buffered(buffer("phosphate"), **anion), (7.0, 400.0)), "binds")
    assert "more strongly" not in one
    assert "more strongly than the salt's" in two


def test_a_buffer_that_moves_with_the_temperature():
    (said,) = cautions(buffered(buffer("Tris")), (8.0, 400.0))
    assert said == (
        "the pH of Tris falls by 0.028 per °C: measure it at the temperature of the plate (meant "
        "for 22 °C)"
    )
    assert not those_about(cautions(buffered(buffer("phosphate")), (7.0, 400.0)), "per °C")


def test_liquids_of_which_no_ph_is_predicted_are_counted():
    said = cautions(buffered(buffer("acetate")), (4.6, 300.0), (4.6, 600.0), (4.6, 900.0))
    assert said == (
        "2 of 3 liquids lie above an ionic strength of 0.5, where no pH is predicted: titrate them",
    )


def test_one_liquid_of_which_no_ph_is_predicted():
    (said,) = cautions(buffered(buffer("acetate")), (4.6, 300.0), (4.6, 600.0))
    assert said.startswith("1 of 2 liquids lies above")
    assert said.endswith("titrate it")


def test_conditions_without_a_recipe_are_passed_over():
    gap = buffered(buffer("acetate", below_ph=5.6))
    assert cautions(gap, (7.0, 300.0), (4.6, 300.0)) == ()
