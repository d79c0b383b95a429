"""A study's wells as arrays."""

import numpy as np
import pandas as pd
import pytest

from muntin.record.definition import Definition
from muntin.surrogate.priors import priors_of
from muntin.window.coded import (
    code,
    group_numbers,
    priors_for,
    readings_of,
    shared_by,
    typical_range,
)
from tests.studies import HCP, LOAD, PH, RECOVERY, RESIN, SHIFT, tables, written

RESPONSES = [RECOVERY, HCP, SHIFT]
PLATE = pd.DataFrame(
    {
        "role": ["test", "test", "reference", "bridge", "blank"],
        "ph": [4.5, 6.0, 7.5, 6.0, np.nan],
        "ph_measured": [4.52, np.nan, np.nan, 6.04, np.nan],
        "salt": [50, 250, 450, 250, np.nan],
        "recovery": [0.1, 0.5, np.nan, 1.04, 0.0],
        "recovery_sd": [0.01, np.nan, np.nan, 0.03, np.nan],
        "hcp": [10.0, 40.0, 80.0, np.nan, 5.0],
        "hcp_sd": [1.0, np.nan, 8.0, np.nan, np.nan],
        "shift": [-1.0, 0.5, np.nan, np.nan, 3.0],
        "bottle": ["a", "b", "a", "b", ""],
    }
)


def definition(**given):
    return Definition.model_validate(tables(**given))


def response(name, made):
    return next(r for r in made.responses if r.name == name)


def test_factors_are_coded_from_minus_one_to_one():
    made = definition(factors=[PH, LOAD, RESIN])
    frame = pd.DataFrame(
        {
            "ph": [4.5, 6.0, 7.5, 7.8],
            "load": [5.0, np.sqrt(5 * 40), 40.0, 5.0],
            "resin": ["Alpha", "Beta", "Gamma", "Alpha"],
        }
    )
    X = code(made, frame)
    assert X.shape == (4, 4)
    np.testing.assert_allclose(X[:, 0], [-1.0, 0.0, 1.0, 1.2], atol=1e-12)
    np.testing.assert_allclose(X[:, 1], [-1.0, 0.0, 1.0, -1.0], atol=1e-12)
    apart = np.sqrt(((X[:3, None, 2:] - X[None, :3, 2:]) ** 2).sum(-1))
    np.testing.assert_allclose(apart, 2.0 * (1.0 - np.eye(3)), atol=1e-12)
    np.testing.assert_allclose(X[3, 2:], X[0, 2:])


def test_readings_of_a_fraction(tmp_path):
    study = written(tmp_path / "study", [PLATE, PLATE.head(2)], responses=RESPONSES)
    readings = readings_of(study, response("recovery", study.definition))
    np.testing.assert_allclose(readings.y, [0.1, 0.5, 1.04, 0.1, 0.5])
    np.testing.assert_allclose(readings.sd, [0.01, 0.0, 0.03, 0.01, 0.0])
    # The measured pH counts where there is one.
    ph = np.array([4.52, 6.0, 6.04, 4.52, 6.0])
    np.testing.assert_allclose(readings.X[:, 0], (ph - 6.0) / 1.5)
    assert readings.inside == ()
    assert [g.tolist() for g in readings.scale] == [[0, 0, 0, 1, 1]]


def test_readings_in_per_cent_are_those_of_the_fraction(tmp_path):
    scaled = PLATE.assign(recovery=100 * PLATE["recovery"], recovery_sd=100 * PLATE["recovery_sd"])
    per_cent = [{**RECOVERY, "unit": "%", "at_least": 80}]
    plain = written(tmp_path / "plain", [PLATE.drop(columns=["hcp", "hcp_sd", "shift"])])
    made = written(
        tmp_path / "study", [scaled.drop(columns=["hcp", "hcp_sd", "shift"])], responses=per_cent
    )
    ours, theirs = (readings_of(s, s.definition.responses[0]) for s in (made, plain))
    np.testing.assert_allclose(ours.y, theirs.y)
    np.testing.assert_allclose(ours.sd, theirs.sd)


def test_readings_of_a_positive_response_are_logarithms_with_relative_errors(tmp_path):
    study = written(tmp_path / "study", [PLATE, PLATE.head(1)], responses=RESPONSES)
    readings = readings_of(study, response("hcp", study.definition))
    np.testing.assert_allclose(readings.y, np.log([10.0, 40.0, 80.0, 10.0]))
    np.testing.assert_allclose(readings.sd, [0.1, 0.0, 0.1, 0.1])
    # Without a plateau a scale error moves the logarithm itself.
    assert readings.scale == ()
    assert [g.tolist() for g in readings.inside] == [[0, 0, 0, 1]]


ERRORS = [
    {"by": ["plate"], "acts": "scale"},
    {"by": ["plate", "ph"], "acts": "inside"},
    {"by": ["bottle"], "acts": "inside"},
]


def test_shared_errors_group_by_target(tmp_path):
    study = written(
        tmp_path / "study", [PLATE, PLATE.head(2)], responses=RESPONSES, shared_errors=ERRORS
    )
    recovery, hcp = (response(n, study.definition) for n in ("recovery", "hcp"))
    shared = shared_by(study.definition, recovery)
    assert shared.scale == (("plate",),)
    assert shared.inside == (("plate", "ph"), ("bottle",))
    readings = readings_of(study, recovery)
    assert [g.tolist() for g in readings.scale] == [[0, 0, 0, 1, 1]]
    # Wells 2 and 4 had the same bottle of pH 6, though one of them measured 6.04.
    assert [g.tolist() for g in readings.inside] == [[0, 1, 1, 2, 3], [0, 1, 1, 0, 1]]
    assert shared_by(study.definition, hcp).scale == ()
    assert len(shared_by(study.definition, hcp).inside) == 3


def test_a_shared_error_may_touch_some_responses_only():
    errors = [
        {"by": ["plate"], "acts": "scale", "responses": ["recovery", "shift"]},
        {"by": ["plate", "ph"], "acts": "inside", "responses": ["recovery"]},
        {"by": ["ph"], "acts": "inside"},
    ]
    made = definition(responses=RESPONSES, shared_errors=errors)
    shared = {r.name: shared_by(made, r) for r in made.responses}
    assert shared["recovery"].scale == (("plate",),)
    assert shared["recovery"].inside == (("plate", "ph"), ("ph",))
    assert shared["hcp"].inside == (("ph",),)
    assert shared["shift"].inside == (("plate",), ("ph",))
    assert shared["hcp"].scale == shared["shift"].scale == ()


def test_group_numbers_follow_first_appearance():
    frame = pd.DataFrame({"plate": ["b", "a", "b"], "ph": [5.1, 5.0, 5.0], "ph_target": 5.0})
    made = definition()
    assert group_numbers(made, frame, ("plate",)).tolist() == [0, 1, 0]
    assert group_numbers(made, frame, ("plate", "ph")).tolist() == [0, 1, 0]
    untargeted = frame.drop(columns="ph_target")
    assert group_numbers(made, untargeted, ("plate", "ph")).tolist() == [0, 1, 2]


# Priors.


def test_typical_range(tmp_path):
    responses = [RECOVERY, {**HCP, "typical": [1.0, 1000.0]}, SHIFT]
    study = written(tmp_path / "study", [PLATE], responses=responses)
    made = study.definition
    assert typical_range(study, response("recovery", made)) == (0.05, 0.95)
    assert typical_range(study, response("hcp", made)) == (1.0, 1000.0)
    assert typical_range(study, response("shift", made)) == (-1.0, 0.5)


@pytest.mark.parametrize(
    ("given", "typical"),
    [
        ({**HCP, "at_most": 100}, (50.0, 200.0)),
        ({**SHIFT, "at_least": 4.0, "at_most": 9.0}, (0.0, 8.0)),
        ({"name": "shift", "kind": "real", "at_most": 0.5}, (-0.5, 1.5)),
    ],
)
def test_typical_range_without_readings_surrounds_the_target(tmp_path, given, typical):
    study = written(tmp_path / "study", responses=[given])
    assert typical_range(study, study.definition.responses[0]) == typical


def test_own_priors_take_the_place_of_the_tables(tmp_path):
    own = {"noise_sd": {"median": 0.05, "log_sd": 0.3}, "mean_sd": 1.5}
    study = written(tmp_path / "study", responses=[{**RECOVERY, "priors": own}])
    priors = priors_for(study, study.definition.responses[0])
    table = priors_of("fraction", (0.05, 0.95))
    assert (priors.noise_sd.median, priors.noise_sd.log_sd) == (0.05, 0.3)
    assert priors.mean_sd == 1.5
    assert priors.process_sd == table.process_sd
    assert priors.length_scale == table.length_scale
