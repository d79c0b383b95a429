"""Checks on readings far from the model, and on plates without readings."""

import numpy as np

from tests.studies import RECOVERY
from tests.window.test_checks import SOUND, SURE, checks


def test_readings_far_from_the_model_fail_without_a_warning(tmp_path):
    rng = np.random.default_rng(0)
    plates = [p.assign(recovery=(p["recovery"] + 0.15 * rng.standard_normal(12))) for p in SOUND]
    sure = {**SURE, "noise_sd": {"median": 0.005, "log_sd": 0.1}}
    found, _ = checks(tmp_path, plates, responses=[{**RECOVERY, "priors": sure}])
    assert not found["coverage"].passed


def test_a_plate_that_is_awaited_does_not_count(tmp_path):
    found, _ = checks(tmp_path, [SOUND[0], SOUND[1].assign(recovery="")], "quadratic")
    assert "other plates" not in found
    assert "which one plate cannot tell" in found["shared errors"].sentence
