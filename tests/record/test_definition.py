"""The study definition: defaults resolved, levels, amounts, and one declaration a key."""

from __future__ import annotations

import numpy as np
import pytest
from pydantic import BaseModel

from muntin.record import open_study
from muntin.record.definition import Definition
from muntin.record.factors import Factor
from muntin.record.keys import Amount, inner_model
from muntin.record.notices import definition_notices
from tests.record.conftest import STUDY


def factor(**keys: object) -> Factor:
    return Factor.model_validate({"name": "salt", "low": 0, "high": 1, "step": 0.1, **keys})


def definition(make, **changed: str) -> Definition:
    text = STUDY
    for old, new in changed.values():
        assert old in text
        text = text.replace(old, new, 1)
    return open_study(make({"study.toml": text})).definition


def test_defaults(make):
    d = definition(make)
    assert (d.title, d.plate, d.required_probability) == ("Small invented study", 96, 0.9)
    assert [f.label for f in d.factors] == ["ph", "salt", "resin"]
    assert [(s.by, s.acts, s.responses) for s in d.shared_errors] == [(("plate",), "scale", None)]
    assert (d.protein, d.stop, d.fixed, d.limits) == (None, None, {}, ())
    plan = d.plan
    assert (plan.bridging_wells, plan.repeats_min, plan.prepared_by) == (4, 1, "well")
    assert len(d.free_wells) == 96
    assert [r.name for r in d.judged] == ["recovery", "hcp"]


def test_kept_within_that_is_not_counted_is_said(make):
    said = [*definition_notices(definition(make, kept=("title", 'judged_by = "well"\ntitle')))]
    assert [s for s in said if "kept_within" in s] == [
        "study.toml, factors, ph: the window does not count kept_within, as judged_by is "
        '"well"; "kept" does'
    ]
    for other in (None, "kept"):
        kept = ("title", "title") if other is None else ("title", f'judged_by = "{other}"\ntitle')
        assert not [
            s for s in definition_notices(definition(make, kept=kept)) if "kept_within" in s
        ]


def test_judged_by_follows_kept_within(make):
    assert definition(make).judged_by == "kept"
    assert definition(make, kept=("kept_within = 0.1\n", "")).judged_by == "well"
    assert definition(make, kept=("title", 'judged_by = "mean"\ntitle')).judged_by == "mean"


def test_a_response_without_target_is_tracked(make):
    d = definition(make, target=("at_most = 100", ""))
    assert [r.judged for r in d.responses] == [True, False]


def test_optional_tables(make):
    text = STUDY + (
        "[protein]\navailable_mg = 40\nper_well_mg = 0.25\n"
        '[plan]\nfree_wells = "A1:B2, H12"\n'
        "[stop]\nwrong_share = 0.02\n"
        '[fixed]\nstages = 2\nresin_lot = "R1"\n'
    )
    d = open_study(make({"study.toml": text})).definition
    assert d.protein is not None
    assert (d.protein.available_mg, d.protein.reserved_mg, d.protein.per_well_mg) == (40, 0, 0.25)
    assert d.free_wells == ("A1", "A2", "B1", "B2", "H12")
    assert d.stop is not None
    assert (d.stop.wrong_share, d.stop.best_probability) == (0.02, None)
    assert d.fixed == {"stages": 2, "resin_lot": "R1"}


def test_priors_are_a_plain_mapping(make):
    priors = "priors = { noise_sd = { median = 0.03, log_sd = 0.5 }, mean_sd = 2 }"
    d = definition(make, priors=("at_least = 0.8", f"at_least = 0.8\n{priors}"))
    assert d.responses[0].priors == {"noise_sd": {"median": 0.03, "log_sd": 0.5}, "mean_sd": 2}
    assert d.responses[1].priors == {}


def test_a_ceiling_gap_may_have_its_prior(make):
    priors = "priors = { ceiling_gap = { median = 0.05, log_sd = 0.7 } }"
    d = definition(make, priors=("at_least = 0.8", f"at_least = 0.8\n{priors}"))
    assert d.responses[0].priors == {"ceiling_gap": {"median": 0.05, "log_sd": 0.7}}


def test_no_shared_error_at_all(make):
    assert definition(make, none=("[study]", "shared_errors = []\n[study]")).shared_errors == ()


def test_a_shared_error_names_the_responses_it_touches(make):
    text = STUDY + '[[shared_errors]]\nby = ["plate"]\nresponses = ["hcp"]\n'
    (shared,) = open_study(make({"study.toml": text})).definition.shared_errors
    assert shared.responses == ("hcp",)


def test_levels_are_clean_numbers():
    levels = factor(low=4.5, high=7.5, step=0.1).levels()
    assert len(levels) == 31
    assert list(levels) == [float(f"{4.5 + 0.1 * i:.1f}") for i in range(31)]


@pytest.mark.parametrize(
    ("low", "high", "step", "last", "count"),
    [
        (0, 500, 25, 500, 21),
        (0, 100, 7, 98, 15),
        (0.001, 0.1, 0.001, 0.1, 100),
        (-1, 1, 2, 1, 2),
        (0.1, 0.7, 0.1, 0.7, 7),
    ],
)
def test_levels_end_at_the_last_whole_step(low, high, step, last, count):
    levels = factor(low=low, high=high, step=step).levels()
    assert (levels[-1], len(levels)) == (last, count)


def test_a_range_of_broken_steps_is_noticed(make):
    folder = make({"study.toml": STUDY.replace("step = 10", "step = 7")})
    assert open_study(folder).notices[0] == (
        "study.toml, factors, salt: whole steps from low end at 896, short of high, which is 900"
    )


PURITY = """
[[responses]]
name = "purity"
kind = "fraction"
"""


@pytest.mark.parametrize(
    ("more", "noticed"),
    [
        ("", False),
        (PURITY, True),
        (PURITY.replace("fraction", "positive"), False),
        (f'{PURITY}\n[[shared_errors]]\nby = ["plate"]\nresponses = ["recovery"]\n', False),
    ],
)
def test_an_error_of_load_shared_by_a_ratio_is_noticed(make, more, noticed):
    found = open_study(make({"study.toml": STUDY + more})).notices
    said = (
        "study.toml: wells of a plate are taken to share an error of load or blank in each of "
        "recovery, purity; a ratio within one well, such as a purity, has none: list the responses "
        "that have it under [[shared_errors]]"
    )
    assert (said in found) == noticed
    assert sum("ratio within one well" in notice for notice in found) == noticed


def test_values_are_shown_with_the_decimals_of_the_step():
    ph, salt = factor(low=4.5, high=7.5, step=0.1), factor(low=50, high=500, step=10)
    assert [ph.shown(v) for v in (6, 6.1, 6.08)] == ["6.0", "6.1", "6.08"]
    assert [salt.shown(v) for v in (250, 92.07)] == ["250", "92.07"]
    assert [ph.shown(v) for v in (5.98133, 7.9999996, 6.5)] == ["5.981", "8.0", "6.5"]
    assert [salt.shown(v) for v in (322.6667, 280.5)] == ["322.67", "280.5"]


def test_a_label_is_not_repeated_by_its_choice():
    resin = Factor.model_validate({"name": "resin", "label": "Resin", "choices": ["Resin A", "B"]})
    assert [resin.named(choice) for choice in ("Resin A", "B", "Resinol")] == [
        *("Resin A", "Resin B", "Resin Resinol")
    ]


def test_plan_levels_narrow_the_levels():
    narrow = factor(low=4.5, high=7.5, plan_low=5.0, plan_high=5.3)
    assert list(narrow.plan_levels()) == [5.0, 5.1, 5.2, 5.3]
    resin = Factor.model_validate({"name": "resin", "choices": ["A", "B"], "plan_choices": ["B"]})
    assert (resin.continuous, list(resin.levels()), list(resin.plan_levels())) == (
        False,
        ["A", "B"],
        ["B"],
    )


def test_amounts_absolute_and_relative():
    absolute, relative = factor(kept_within=0.1).kept_within, factor(set_sd="2,5 %").set_sd
    assert absolute == Amount(value=0.1)
    assert relative == Amount(value=0.025, relative=True)
    np.testing.assert_array_equal(absolute.at([3.0, -4.0]), [0.1, 0.1])
    np.testing.assert_allclose(relative.at([[100.0], [-40.0]]), [[2.5], [1.0]], rtol=1e-15)
    assert (str(absolute), str(relative)) == ("0.1", "2.5 %")


def _models(model: type[BaseModel]) -> list[type[BaseModel]]:
    inner = [inner_model(info.annotation) for info in model.model_fields.values()]
    found = [one for one in inner if one is not None and one is not Amount]
    return [model, *(deep for one in found for deep in _models(one))]


@pytest.mark.parametrize("model", _models(Definition), ids=lambda model: model.__name__)
def test_every_key_has_help(model):
    for name, info in model.model_fields.items():
        assert info.description, name
