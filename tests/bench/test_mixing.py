"""One well's mix: volumes by hand, and why there is none."""

from __future__ import annotations

from typing import Any

import pytest

from muntin.bench.mixing import Mix, Mixer
from muntin.bench.nearby import nearest_that
from muntin.bench.recipe import Refusal
from muntin.record.definition import Definition, definition_faults
from tests.bench.bottled import BENCH, HIGH, LOW
from tests.studies import PH, RESIN, SALT, tables

WATER = {"name": "water"}


def mixer(**changed: Any) -> Mixer:
    factors = changed.pop("factors", [PH, SALT])
    bench = {k: v for k, v in {**BENCH, **changed}.items() if v is not None}
    definition = Definition.model_validate(tables(factors=factors, bench=bench))
    assert definition_faults(definition) == []
    return Mixer(definition)


def drawn(mix: Mix | Refusal, of: Mixer) -> dict[str, str]:
    assert isinstance(mix, Mix)
    assert mix.steps is not None
    return {stock: of.pipette.shown(steps) for stock, steps in mix.steps.items()}


def reason(mix: Mix | Refusal) -> str:
    assert isinstance(mix, Refusal)
    return mix.reason


def test_two_bottles_of_one_ph_by_hand() -> None:
    of = mixer()
    mix = of.mix({"ph": 5.0, "salt": 200})
    # 200 of 500 mM of 400 µL: 160 µL of the strong one.
    assert drawn(mix, of) == {"low salt (pH 5.0)": "240", "high salt (pH 5.0)": "160"}


def test_rounding_loses_no_step_and_says_what_it_makes() -> None:
    of = mixer(stocks=[LOW, {**HIGH, "holds": {"salt": 700}}])
    mix = of.mix({"ph": 6.5, "salt": 100})
    # 57.14 µL of the strong one: 57 µL, 0.25 mM short of 100.
    assert drawn(mix, of) == {"low salt (pH 6.5)": "343", "high salt (pH 6.5)": "57"}
    assert isinstance(mix, Mix)
    assert mix.made == {"salt": pytest.approx(700 * 57 / 400)}
    assert sum(mix.recipe.parts.values()) == pytest.approx(1.0, abs=1e-12)


def test_a_bottle_that_holds_just_that_is_taken_alone() -> None:
    of = mixer(stocks=[{**LOW, "holds": {"salt": 50}}, HIGH])
    assert drawn(of.mix({"ph": 5.0, "salt": 50}), of) == {"low salt (pH 5.0)": "400"}


def test_strong_bottles_are_diluted_to_what_every_mix_holds() -> None:
    buffer = {"name": "buffer", "per": "ph", "holds": {"buffer": 80}}
    salt = {"name": "salt", "holds": {"salt": 1000}}
    of = mixer(stocks=[buffer, salt, WATER], every_mix={"buffer": 20})
    expected = {"buffer (pH 5.0)": "100", "salt": "100", "water": "200"}
    assert drawn(of.mix({"ph": 5.0, "salt": 250}), of) == expected


def test_bottles_of_two_ph_are_never_mixed() -> None:
    bottles = [
        {"name": f"{ph}, {salt}", "holds": {"ph": ph, "salt": salt}}
        for ph in (5.0, 6.0)
        for salt in (0, 500)
    ]
    of = mixer(stocks=bottles)
    assert drawn(of.mix({"ph": 6.0, "salt": 100}), of) == {"6.0, 0": "320", "6.0, 500": "80"}
    assert reason(of.mix({"ph": 5.5, "salt": 100})) == "finds no bottle of ph 5.5"


def test_a_mix_without_the_bottle_that_sets_the_ph_is_none() -> None:
    salt = {"name": "salt", "holds": {"salt": 500}}
    buffer = {"name": "buffer", "per": "ph", "holds": {"salt": 0}}
    of = mixer(stocks=[buffer, salt, WATER])
    for shares in (drawn(of.mix({"ph": 5.0, "salt": s}), of) for s in (50, 250, 450)):
        assert "buffer (pH 5.0)" in shares


def test_choices_come_with_their_bottle() -> None:
    bottles = [{"name": f"salt {r}", "holds": {"salt": 450, "resin": r}} for r in ("Alpha", "Beta")]
    of = mixer(factors=[SALT, RESIN], stocks=[*bottles, WATER], ph_factor=None)
    mix = of.mix({"salt": 150, "resin": "Beta"})
    assert drawn(mix, of) == {"salt Beta": "133.5", "water": "266.5"}
    assert reason(of.mix({"salt": 150, "resin": "Gamma"})) == "finds no bottle of resin Gamma"


@pytest.mark.parametrize(
    ("changed", "condition", "said", "near"),
    [
        (
            {"stocks": [LOW, {**HIGH, "holds": {"salt": 320}}]},
            {"ph": 5.0, "salt": 400},
            "is out of reach: the bottles for it hold salt 0 to 320",
            {"ph": 5.0, "salt": 300},
        ),
        (
            {"pipette_floor_ul": 50},
            {"ph": 5.0, "salt": 50},
            "takes 40 µL of high salt (pH 5.0); the pipette draws no less than 50 µL",
            {"ph": 5.0, "salt": 100},
        ),
        (
            {"well_ul": 40, "pipette_step_ul": 10, "pipette_floor_ul": 10},
            {"ph": 5.0, "salt": 200},
            "comes out as salt 250, more than half a step off, in pipette steps of 10 µL",
            # 150 comes out as 125, just half a step off; 250 would be as near.
            {"ph": 5.0, "salt": 150},
        ),
        (
            {"every_mix": {"buffer": 20}, "stocks": [LOW, {**HIGH, "holds": {"buffer": 20}}]},
            {"ph": 5.0, "salt": 400},
            "is out of reach: the bottles for it hold salt 0 to 0",
            None,
        ),
        (
            {
                "every_mix": {"buffer": 20},
                "stocks": [
                    {**LOW, "holds": {"buffer": 20}},
                    {**HIGH, "holds": {"buffer": 10, "salt": 450}},
                ],
            },
            {"ph": 5.0, "salt": 400},
            "is out of reach: no mix of low salt (pH 5.0), high salt (pH 5.0) makes all of it at "
            "once",
            None,
        ),
    ],
)
def test_what_cannot_be_mixed_says_why_and_what_can(
    changed: dict[str, Any],
    condition: dict[str, float],
    said: str,
    near: dict[str, float] | None,
) -> None:
    of = mixer(**changed)
    assert reason(of.mix(condition)) == said
    assert nearest_that(of.works, of.definition, condition, ["ph", "salt"], ["ph"]) == near


def test_the_nearest_may_be_planned_and_keeps_its_bottle() -> None:
    of = mixer(stocks=[LOW, {**HIGH, "holds": {"salt": 320}}])
    barred = of.definition.model_validate(
        {
            **of.definition.model_dump(),
            "forbidden": [{"conditions": "salt == 300 and ph > 4.5", "because": "cloudy"}],
        }
    )
    asked = {"ph": 5.0, "salt": 400}
    assert nearest_that(of.works, barred, asked, ["ph", "salt"], ["ph"]) == {"ph": 5.0, "salt": 250}
    assert nearest_that(of.works, barred, asked, ["ph", "salt"]) == {"ph": 4.5, "salt": 300}


def test_without_a_volume_there_are_shares_only() -> None:
    of = mixer(well_ul=None)
    mix = of.mix({"ph": 5.0, "salt": 200})
    assert isinstance(mix, Mix)
    assert mix.steps is None
    assert dict(mix.recipe.parts) == {
        "low salt (pH 5.0)": pytest.approx(0.6),
        "high salt (pH 5.0)": pytest.approx(0.4),
    }
