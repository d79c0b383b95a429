"""The distance between levels follows the plan's range."""

import numpy as np

from muntin.design.candidates import candidate_frame
from muntin.design.levels import Levels
from tests.design.test_candidates import definition, run
from tests.studies import PH, SALT


def test_a_narrow_plan_range_has_room_for_all_its_levels():
    narrow = {**PH, "step": 0.1, "plan_low": 5.6, "plan_high": 6.0, "per_plate": 4}
    made = definition(factors=[narrow, SALT])
    frame = candidate_frame(made, (run(5.6, 100.0),))
    levels, used = Levels(made, frame), set()
    while left := sorted(set(frame["ph"][levels.open()]) - used):
        levels.use(int(np.flatnonzero(frame["ph"] == left[0])[0]))
        used.add(left[0])
    assert len(used) == 4
