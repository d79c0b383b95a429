"""Pages of small invented studies."""

from __future__ import annotations

from pathlib import Path

from muntin.record import open_study
from muntin.report.advice_files import read_inputs
from muntin.report.page.build import Page, build_page, plan_or_reasons
from muntin.window.assessment import assess
from tests.report.studies import STUDY, plate, write

HOSTILE = """<script>alert("x")</script> & 'so'"""
PLAIN = STUDY.replace("kept_within = 0.1\n", "")
_FIXED = '\n[fixed]\nelution_volume_ul = 200\nresin = "HOSTILE"\n'
_RECORDED = (
    '{"date":"2026-05-04","wrong_share":0.02,"best_probability":null,"wells_read":0,"reason":""}\n'
)
_STOP = "\n[stop]\nwrong_share = 0.02\n"


def page_of(folder: Path, wells: int = 6, seed: int = 1) -> Page:
    """The page of a study by the quadratic; without `wells` no plate is planned."""
    study = open_study(folder)
    view = assess(study, surrogate="quadratic", seed=seed)
    plan, unplanned = plan_or_reasons(view, wells, "edge", seed) if wells else (None, ("so asked",))
    settings = {"wells": wells, "surrogate": "quadratic", "seed": seed}
    inputs = read_inputs(folder)
    return build_page(view, plan, unplanned=unplanned, settings=settings, inputs=inputs)


def _with_one_left_out() -> str:
    """A plate on which one reading is wrong, and left out with a hostile reason."""
    lines = plate(12).splitlines()
    well, role, ph, salt, *_ = lines[5].split(",")
    reason = HOSTILE.replace('"', '""')
    lines[5] = f'{well},{role},{ph},{salt},0.5,"{reason}"'
    return "\n".join(lines) + "\n"


def hostile_page(folder: Path) -> Page:
    """The page of a study whose texts try to be HTML: two factors, one response, two plates, one
    reading left out.
    """
    quoted = HOSTILE.replace('"', '\\"')
    toml = PLAIN.replace("Small invented study", quoted) + _FIXED.replace("HOSTILE", quoted) + _STOP
    second = "\n".join([plate(12).splitlines()[0], *plate(12).splitlines()[7:]]) + "\n"
    tables = {"plates/plate-01.csv": _with_one_left_out(), "plates/plate-02.csv": second}
    write(folder, {"study.toml": toml, **tables, "plates/plate-01.toml": 'by = "lab <2>"\n'})
    (folder / "stop-rule.jsonl").write_text(_RECORDED)
    (folder / "plates/plate-02.toml").write_text('repeats = "plate-01"\n')
    return page_of(folder)
