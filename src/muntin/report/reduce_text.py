"""A reduction on the screen: what was read, recoveries, what plates share, flags, files."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any, Literal

import numpy as np
from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from muntin.assay.flags import Flag
from muntin.assay.given import Given
from muntin.assay.inputs import load_of
from muntin.assay.reduction import PlateReduction, Reduction
from muntin.record.faults import counted, listed
from muntin.record.readings import INFORMING
from muntin.record.reduced import REDUCTIONS
from muntin.report.reduce_files import flag_facts, shared_facts
from muntin.report.text import few, sheet

_NAMES = {
    "collected_of_load": "eluates over load",
    "freed_of_bound": "set free while eluting, over bound after the load",
    "collected_of_bound": "eluates over bound after the load",
}
# What a flag says of several wells; the gravest first.
_SAYS = {
    "below_blank": "far below the blank, used as read: were they read?",
    "closure": "closure further from 1 than its own uncertainty explains",
    "recovery_high": "recovery higher than can be",
    "above_range": "above the linear range at every dilution, kept as > or <",
    "bound_small": "too little bound for a recovery of what is bound",
    "turbid": "turbid",
    "path_odd": "path by the water band far from that by volume",
    "hold_up_negative": "more weighed than the well held",
    "not_read": "not read",
    "below_range": "below the linear range, used as read (< where all eluates are)",
}
_MOST_FLAGS, _OWN_WORDS, _NAMED = 12, 2, 6
_CAUTION = (
    "Flags take nothing out. A recovery is that of the stages, volumes and hold-up entered; "
    "measure the hold-up and the height of the water band in your own buffer."
)
_PRIOR_LOG_SD = 0.5


def reduce_facts(
    reduction: Reduction, given: Sequence[Given], files: Sequence[Path]
) -> dict[str, Any]:
    """Return a reduction as plain values."""
    return {
        "command": "reduce",
        "recovery": reduction.assay.recovery,
        "response": reduction.response.name,
        "reads": len(reduction.reads),
        "plates": [_plate_facts(reduction, plate, given) for plate in reduction.plates],
        "scale_error": scale_error(reduction),
        "notices": list(reduction.notices),
        "files": [str(path) for path in files],
    }


def _plate_facts(
    reduction: Reduction, plate: PlateReduction, given: Sequence[Given]
) -> dict[str, Any]:
    mine = {one.well: one for one in given if one.plate == plate.inputs.plate}
    return {
        "plate": plate.inputs.plate,
        "load_mg_ml": float(load_of(plate.inputs, reduction.assay, {})),
        "shared": shared_facts(plate, reduction.assay),
        "flags": flag_facts(plate),
        "wells": [
            _well_facts(plate, i, mine.get(well)) for i, well in enumerate(plate.inputs.wells)
        ],
    }


def _well_facts(plate: PlateReduction, i: int, given: Given | None) -> dict[str, Any]:
    facts: dict[str, Any] = {"well": plate.inputs.wells[i], "role": plate.inputs.roles[i]}
    for name, quantity in plate.quantities.items():
        facts[name] = quantity.value[i]
        facts[f"{name}_sd"] = quantity.own[i]
        facts[f"{name}_shared_sd"] = quantity.shared[i]
    if given is not None:
        facts |= {"given": given.value, "given_sd": given.sd, "not_given": given.why}
    return facts


def scale_error(reduction: Reduction) -> float:
    """Return the scale error that the plates' shared uncertainties make, root mean square."""
    scales = np.array([plate.shared.scale for plate in reduction.plates])
    known = scales[np.isfinite(scales)]
    return float(np.sqrt((known**2).mean())) if len(known) else float("nan")


def reduce_screen(
    reduction: Reduction, given: Sequence[Given], files: Sequence[Path]
) -> RenderableType:
    """Return the screen of `reduce`."""
    flags = [flag for plate in reduction.plates for flag in plate.flags]
    return sheet(
        reduction.study.definition.title,
        [
            ("Read", _read(reduction)),
            ("Noted", few(reduction.notices, 4, "see --json")),
            ("Recovery", [_NAMES[reduction.assay.recovery] + ".", _table(reduction)]),
            ("Bound", _bound(reduction)),
            ("Shared", _shared(reduction)),
            ("Drawn", _drawn(reduction)),
            ("Flags", _flag_lines(flags) or ["None."]),
            ("Given", _given_lines(reduction, given)),
            ("Caution", [_CAUTION]),
            ("Written", [_places(reduction, files)]),
        ],
    )


def _read(reduction: Reduction) -> list[str]:
    wells = sum(len(plate.inputs.wells) for plate in reduction.plates)
    unread = [
        plate.name
        for plate in reduction.study.plates
        if plate.name not in [one.inputs.plate for one in reduction.plates]
    ]
    line = (
        f"{counted(len(reduction.reads), 'read')} on {counted(len(reduction.plates), 'plate')}, "
        f"{counted(wells, 'well')} reduced."
    )
    return [line + (f" Without reads: {listed(unread)}." if unread else "")]


def _table(reduction: Reduction) -> Table:
    table = Table(box=None, pad_edge=False, padding=(0, 2, 0, 0), header_style="dim")
    for index, heading in enumerate(
        ("plate", "wells", "load,\nmg/mL", "recovery", "own sd", "shared", "closure")
    ):
        justify: Literal["left", "right"] = "right" if index else "left"
        table.add_column(heading, justify=justify, overflow="fold", no_wrap=not index)
    for plate in reduction.plates:
        table.add_row(*map(Text, _table_row(reduction, plate)))
    return table


def _table_row(reduction: Reduction, plate: PlateReduction) -> tuple[str, ...]:
    recovery = plate.quantities[reduction.assay.recovery]
    told = np.array([role in INFORMING for role in plate.inputs.roles])
    # Of a read above the range only a bound is known, which is no end of a range.
    known = told & (plate.inputs.states != "high").all(axis=1)
    return (
        plate.inputs.plate,
        str(int(told.sum())),
        f"{float(load_of(plate.inputs, reduction.assay, {})):.3g}",
        _range(recovery.value[known], "{:.2f}"),
        _middle(recovery.own[told], "{:.3f}"),
        f"{100 * plate.shared.scale:.1f} %",
        _range(plate.quantities["closure"].value[known], "{:.2f}"),
    )


def _bound(reduction: Reduction) -> list[str]:
    """What was bound in all and per volume of resin, at which concentration, after which time."""
    minutes = reduction.fixed.contact_minutes
    after = "a contact time that [fixed] does not tell" if minutes is None else f"{minutes:g} min"
    lines = []
    for plate in reduction.plates:
        use = np.array([role in INFORMING for role in plate.inputs.roles])
        bound = _range(plate.quantities["bound_ug"].value[use], "{:.3g}")
        capacity = _range(plate.quantities["capacity_mg_ml"].value[use], "{:.3g}")
        kp = plate.quantities["log10_kp"].value[use]
        lines.append(
            f"{plate.inputs.plate}: {bound} µg, {capacity} mg/mL resin "
            f"after {after}; log10 Kp {_range(kp, '{:.2f}')}."
        )
    return lines


def _drawn(reduction: Reduction) -> list[str]:
    """How far Monte Carlo and the first order are apart."""
    if not reduction.draws:
        return []
    ratios = [
        plate.drawn["all"][reduction.assay.recovery].sd[i] / total - 1.0
        for plate in reduction.plates
        for i, total in enumerate(plate.quantities[reduction.assay.recovery].total)
        if plate.inputs.roles[i] in INFORMING and np.isfinite(total)
    ]
    if not ratios:
        return []
    return [
        f"{reduction.draws} Monte Carlo draws a plate: standard uncertainties of recoveries lie "
        f"{100 * min(ratios):+.1f} to {100 * max(ratios):+.1f} % off those of first order, which "
        "are given. The record has the intervals."
    ]


def _range(values: Any, form: str) -> str:
    known = values[np.isfinite(values)]
    if not len(known):
        return "-"
    return f"{form.format(known.min())} to {form.format(known.max())}"


def _middle(values: Any, form: str) -> str:
    known = values[np.isfinite(values)]
    return form.format(float(np.median(known))) if len(known) else "-"


def _shared(reduction: Reduction) -> list[str]:
    """What the plates' wells share, and how to let the study know of it, once."""
    scale = scale_error(reduction)
    if not np.isfinite(scale):
        return ["Not known: no recovery was found."]
    plate = reduction.plates[0]
    by = shared_facts(plate, reduction.assay)["shared_by"]
    most = sorted(by, key=lambda name: -by[name])[:3]
    name = reduction.response.name
    return [
        f"Wells of a plate read high or low together by {100 * scale:.1f} % (standard "
        f"uncertainty), most of it by {', '.join(_words(one) for one in most)}. It is in no "
        f"{name}_sd.",
        *_prior(name, scale, [*reduction.response.priors]),
    ]


def _prior(name: str, scale: float, own: Sequence[str]) -> list[str]:
    """How the study is told of the scale error: a line that can be copied."""
    if "scale_error" in own:
        return [f"The study has a prior of its own for the scale error of {name}; compare it."]
    line = f"scale_error = {{ median = {scale:.3f}, log_sd = {_PRIOR_LOG_SD} }}"
    if own:
        return [f"To tell the model, put into the priors of {name} in study.toml:", line]
    return [f"To tell the model, put into [[responses]] of {name}:", f"priors.{line}"]


def _words(source: str) -> str:
    said = {"load": "drawing the load", "load_read": "reads of the load"}
    said |= {"load_path": "paths of the load", "load_dilution": "diluting the load"}
    said |= {"path_shared": "path reference", "hold_up_mean": "mean hold-up"}
    said |= {"resin_mean": "mean resin", "blank": "blanks", "blank_other": "borrowed blanks"}
    return said.get(source, source)


def _flag_lines(flags: Sequence[Flag]) -> list[str]:
    """Flags of plates in words, then those of wells counted by kind, the gravest first."""
    lines = [f"{flag.plate}: {flag.text}." for flag in flags if not flag.well]
    groups: dict[tuple[str, str], list[Flag]] = defaultdict(list)
    for flag in flags:
        if flag.well:
            groups[flag.plate, flag.kind].append(flag)
    order = [*_SAYS]
    for (plate, kind), here in sorted(groups.items(), key=lambda one: order.index(one[0][1])):
        lines.append(f"{plate}: {_grouped(kind, here)}.")
    return few(lines, _MOST_FLAGS, "see --json")


def _grouped(kind: str, here: Sequence[Flag]) -> str:
    """One kind of flag: its own words where few wells have it, else their names or number."""
    if len(here) <= _OWN_WORDS:
        return "; ".join(f"{f.well} {f.fraction}".strip() + f" {f.text}" for f in here)
    places = []
    for fraction in dict.fromkeys(flag.fraction for flag in here):
        wells = [flag.well for flag in here if flag.fraction == fraction]
        many = counted(len(wells), "well")
        places.append(
            f"{fraction} in {many}"
            if len(wells) > _NAMED
            else f"{fraction} {listed(wells)}".strip()
        )
    return f"{_SAYS[kind]}: {'; '.join(places)}"


def _given_lines(reduction: Reduction, given: Sequence[Given]) -> list[str]:
    fresh = [one for one in given if not one.why and not one.agrees]
    agree = [one for one in given if one.agrees]
    censored = [one for one in fresh if one.value[:1] in "<>"]
    lines = []
    if fresh:
        rest = f", {len(censored)} of them censored (< or >)" if censored else ""
        lines.append(
            f"{counted(len(fresh), 'reading')} of {reduction.response.name}, each with its own "
            f"standard uncertainty{rest}."
        )
    if agree:
        lines.append(
            f"{counted(len(agree), 'well')} hold the same reading in their table already; they get "
            "its standard uncertainty."
        )
    return [*lines, *_left_out(given)]


def _left_out(given: Sequence[Given]) -> list[str]:
    by: Mapping[tuple[str, str], list[str]] = defaultdict(list)
    for one in given:
        if one.why:
            by[one.plate, one.why].append(one.well)
    lines = [f"{plate}, none for {listed(wells)}: {why}." for (plate, why), wells in by.items()]
    return few(lines, 6, "see --json")


def _places(reduction: Reduction, files: Sequence[Path]) -> str:
    """Results by name; of what they were computed from only the folder."""
    results = [str(path) for path in files if path.parent.name == "results"]
    folder = reduction.study.folder / REDUCTIONS
    return f"{listed(results)}; in {folder} masses, reads and record of each plate."
