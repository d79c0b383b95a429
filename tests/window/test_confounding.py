"""Factors that go with a plate, a lot or another column."""

import numpy as np
import pytest

from muntin.window.checks.confounding import confounding
from tests.studies import PH, RESIN, SALT, read, spread, written

FACTORS = [PH, SALT]


def plate(seed, count=12, **fixed):
    return read(spread(FACTORS, count, seed).assign(**fixed), seed)


def found(folder, plates, notes=(), **given):
    """Names of the checks that failed, how serious, and what they say."""
    (folder / "study" / "plates").mkdir(parents=True)
    for number, text in enumerate(notes, start=1):
        (folder / "study" / "plates" / f"plate-{number:02d}.toml").write_text(text)
    checks = confounding(written(folder / "study", plates, **{"factors": FACTORS, **given}))
    assert {check.name for check in checks} == {"confounding"}
    assert {check.response for check in checks} == {None}
    return [(check.serious, check.sentence) for check in checks if not check.passed]


def test_a_level_on_each_plate_is_serious(tmp_path):
    assert found(tmp_path, [plate(1, ph=5.0), plate(2, ph=6.0), plate(3, ph=7.0)]) == [
        (
            True,
            "pH goes with plate: each level was run on its own, so an effect of pH cannot be told "
            "from an error of the plate; repeat conditions across them.",
        )
    ]


def test_levels_that_nearly_go_with_the_plate_are_caught(tmp_path):
    first, second = plate(1, ph=5.0), plate(2, ph=7.0)
    first.loc[0, "ph"] = 5.5
    assert [serious for serious, _ in found(tmp_path, [first, second])] == [True]


def test_a_level_run_on_several_plates_tells_them_apart(tmp_path):
    plates = [plate(seed, ph=level) for seed, level in enumerate((5.0, 7.0, 5.0, 7.0))]
    assert found(tmp_path, plates) == []


def test_ordinary_plates_pass(tmp_path):
    assert found(tmp_path, [plate(seed) for seed in (1, 2, 3)]) == []


def test_plates_that_move_towards_the_edge_pass(tmp_path):
    """A first plate over the whole range, then ones around the edge of the window."""
    second, third = plate(2, 8), plate(3, 8)
    second["ph"] = np.array([5.5, 6.0, 6.5, 5.5, 6.0, 6.5, 6.0, 6.0])
    third["ph"] = np.array([6.0, 6.5, 6.0, 6.5, 6.0, 6.5, 6.5, 6.0])
    assert found(tmp_path, [plate(1), second, third]) == []
    assert found(tmp_path / "two", [second, third]) == []


def test_a_factor_with_one_level_goes_with_nothing(tmp_path):
    assert found(tmp_path, [plate(1, ph=6.0), plate(2, ph=6.0)]) == []


def test_one_plate_goes_with_nothing(tmp_path):
    assert found(tmp_path, [plate(1)]) == []


def test_a_choice_on_each_plate_is_serious(tmp_path):
    factors = [PH, RESIN]
    plates = [
        read(spread(factors, 12, seed).assign(resin=resin), seed)
        for seed, resin in enumerate(("Alpha", "Beta", "Gamma"))
    ]
    ((serious, sentence),) = found(tmp_path, plates, factors=factors)
    assert serious
    assert sentence.startswith("resin goes with plate: ")


def test_lots_of_the_notes_count_and_are_told_with_the_plate(tmp_path):
    plates = [plate(1, ph=5.0), plate(2, ph=7.0)]
    notes = ['resin_lot = "R-1"\nfeed_lot = "F-1"\n', 'resin_lot = "R-2"\nfeed_lot = "F-1"\n']
    ((_, sentence),) = found(tmp_path, plates, notes)
    assert sentence.startswith("pH goes with plate and resin_lot: ")


def test_lots_that_gather_plates_count_of_themselves(tmp_path):
    plates = [plate(seed, ph=level) for seed, level in enumerate((5.0, 5.0, 7.0, 7.0))]
    notes = [f'feed_lot = "{lot}"\n' for lot in ("F-1", "F-1", "F-2", "F-2")]
    ((serious, sentence),) = found(tmp_path, plates, notes)
    assert serious
    assert sentence.startswith("pH goes with feed_lot: ")


@pytest.mark.parametrize(("levels", "serious"), [(3, True), (6, False)])
def test_a_buffer_for_each_level_of_a_number(tmp_path, levels, serious):
    """Few buffers decide the effect; along many of them it is smooth beside their errors."""
    frame = plate(1, 24)
    frame["ph"] = np.tile(np.linspace(4.5, 7.0, levels), 24 // levels)
    frame["buffer"] = [f"B-{ph:g}" for ph in frame["ph"]]
    ((found_serious, sentence),) = found(tmp_path, [frame])
    assert found_serious == serious
    assert sentence.startswith("pH goes with buffer: each level ")
    assert serious or sentence.endswith("a shared error by buffer would say so.")


def test_a_stock_made_anew_for_each_plate_tells_itself_apart(tmp_path):
    frames = []
    for number in (1, 2):
        frame = plate(number, 24)
        frame["ph"] = np.tile([5.0, 6.0, 7.0], 8)
        frame["stock"] = [f"{number}-{ph:g}" for ph in frame["ph"]]
        frames.append(frame)
    assert found(tmp_path, frames) == []


def test_a_name_for_each_well_or_a_few_remarks_say_nothing(tmp_path):
    frame = plate(1, 24)
    frame["sample"] = [f"S-{i}" for i in range(24)]
    frame["remark"] = ["" if ph < 7.0 else "cloudy" for ph in frame["ph"]]
    frame["reader"] = np.where(frame["ph"] < 6.0, 1, 2)
    assert found(tmp_path, [frame]) == []


def test_a_factor_that_a_shared_error_names_is_known_to_the_model(tmp_path):
    shared = [{"by": ["plate"], "acts": "scale"}, {"by": ["plate", "ph"], "acts": "inside"}]
    plates = [plate(1, ph=5.0), plate(2, ph=7.0)]
    assert found(tmp_path, plates, shared_errors=shared) == []


def test_wells_without_a_reading_do_not_count(tmp_path):
    later = plate(3).astype({"recovery": object}).assign(recovery="")
    plates = [plate(1, ph=5.0), plate(2, ph=7.0), later]
    assert len(found(tmp_path, plates)) == 1


def test_a_void_plate_does_not_count(tmp_path):
    plates = [plate(1, ph=5.0), plate(2, ph=7.0), plate(3)]
    assert len(found(tmp_path, plates, ["", "", 'void = "the feed was warm"\n'])) == 1
    assert found(tmp_path / "all", plates) == []


def test_on_a_log_scale_ratios_count(tmp_path):
    """Levels 1, 2 on one plate and 40, 80 on the other: apart in ratios, hardly in numbers."""
    factors = [PH, {"name": "load", "low": 1, "high": 100, "step": 1, "scale": "log"}]
    frames = [
        read(spread([PH], 12, seed).assign(load=np.tile(levels, 6)), seed)
        for seed, levels in enumerate(([1, 2], [40, 80]))
    ]
    assert len(found(tmp_path, frames, factors=factors)) == 1
    line = [factors[0], {**factors[1], "scale": "linear"}]
    assert found(tmp_path / "line", frames, factors=line) == []


def test_many_small_groups_hold_much_by_chance(tmp_path):
    """Twelve vials of two wells hold 0.93 of the variance, but 0.87 less what chance gives them."""
    feed = {"name": "feed", "low": 0, "high": 100, "step": 0.5}
    frame = read(spread([PH], 24, 3), 3)
    middle = 8.0 + 7.5 * np.arange(12)
    frame["feed"] = np.round(np.r_[middle - 7.0, middle + 7.0] * 2.0) / 2.0
    frame["vial"] = [f"V-{i % 12}" for i in range(24)]
    assert found(tmp_path, [frame], factors=[PH, feed]) == []
    frame["feed"] = np.r_[middle - 2.0, middle + 2.0]
    assert len(found(tmp_path / "close", [frame], factors=[PH, feed])) == 1
