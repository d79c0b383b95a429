"""Protein that the wells to be chosen may take together."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from muntin.design.budget import Budget, ProteinShortError
from muntin.design.candidates import RunCondition, candidate_frame
from muntin.design.levels import Levels
from muntin.record.definition import Definition
from tests.studies import LOAD, PH, tables


def candidates(per_plate=None, **more):
    load = {**LOAD, **({} if per_plate is None else {"per_plate": per_plate})}
    made = Definition.model_validate(tables(factors=[PH, load], **more))
    frame = candidate_frame(made, (RunCondition((5.0, 10.0), (), False),))
    return Levels(made, frame), frame["load"].to_numpy(dtype=float) * 0.02


def test_what_does_not_suffice_is_told_with_what_would():
    levels, mg = candidates()
    Budget(mg, 1.0).require(levels.open(), 10)
    with pytest.raises(ProteinShortError) as short:
        Budget(mg, 1.0).require(levels.open(), 11)
    assert short.value.enough == 10
    with pytest.raises(ProteinShortError) as none:
        Budget(mg, -0.5).require(levels.open(), 0)
    assert none.value.enough == 0


def test_a_well_is_affordable_where_the_cheapest_can_fill_the_rest():
    # 1 mg for 5 wells: one at 0.6 leaves 0.4 for four at 0.1 mg; one at 0.7 does not.
    levels, mg = candidates()
    open_wells = Budget(mg, 1.0).affordable(levels, levels.open(), 5, 1, [])
    assert mg[open_wells].max() == pytest.approx(0.6)
    assert open_wells[np.isclose(mg, 0.6)].all()


def test_the_rest_is_filled_at_levels_that_stay_open():
    # With one level a plate, a load of 15 would have to be that of all 5 wells: 1.5 mg.
    levels, mg = candidates(per_plate=1)
    open_wells = Budget(mg, 1.0).affordable(levels, levels.open(), 5, 1, [])
    assert mg[open_wells].max() == pytest.approx(0.2)


def test_a_rest_too_small_for_a_block_repeats_what_is_taken():
    # 5 wells in blocks of 3: the last two repeat a well at 0.1 that is there, or the block itself.
    levels, mg = candidates()
    cheap = int(np.flatnonzero(np.isclose(mg, 0.1))[0])
    for taken, most in (([cheap], 0.3), ([], 0.2)):
        open_wells = Budget(mg, 1.1).affordable(levels, levels.open(), 5, 3, taken)
        assert mg[open_wells].max() == pytest.approx(most)


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    st.integers(1, 14),
    st.integers(1, 4),
    st.floats(0.0, 4.0),
    st.one_of(st.none(), st.integers(1, 3)),
    st.booleans(),
    st.lists(st.integers(0, 10_000), min_size=14, max_size=14),
)
def test_whatever_is_chosen_the_budget_is_kept_and_the_wells_are_filled(
    wells, repeats, mg_left, per_plate, limited, choices
):
    limits = [{"allow": "load >= 40 - 10 * (ph - 4.5)"}] if limited else []
    levels, mg = candidates(per_plate, limits=limits)
    budget, cheapest = Budget(mg, mg_left), mg[levels.open()].min()
    if cheapest * wells > mg_left + 1e-9:
        with pytest.raises(ProteinShortError) as short:
            budget.require(levels.open(), wells)
        assert short.value.enough < wells
        assert cheapest * (short.value.enough + 1) > mg_left
        return
    budget.require(levels.open(), wells)
    taken = []
    for choice in choices:
        left = wells - len(taken)
        if not left:
            break
        block = min(repeats, left)
        still = np.flatnonzero(budget.affordable(levels, levels.open(), left, block, taken))
        if left < repeats and taken:
            still = np.intersect1d(still, taken)
        chosen = int(still[choice % len(still)])
        for _ in range(block):
            levels.use(chosen)
            budget.spend(chosen)
            taken.append(chosen)
    assert len(taken) == wells
    assert mg[taken].sum() <= mg_left + 1e-8
