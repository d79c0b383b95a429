"""What to keep in mind before the numbers are used."""

from __future__ import annotations

from collections.abc import Iterable

from muntin.record.faults import number
from muntin.report.words import joined, labels
from muntin.window.assessment import Assessment

_AID = "Development aid, not for release decisions."
_PLATE = "A plate is not a column: confirm set point and edges of the window on columns."
_CHOSEN = "Repeat the set point before believing it: the best of many looks better than it is."
_SAFETY = (
    "Site procedures and licensed practice come first; care with acids, caustic and azide; balance "
    "the rotor."
)


def cautions(view: Assessment, fixed: bool = True) -> tuple[str, ...]:
    """Return the cautions that go with any advice on this study, the provisional one first.

    `fixed` spells out what the study keeps fixed.
    """
    definition = view.study.definition
    said = []
    if view.awaited:
        said.append(f"Provisional: {labels(definition, view.awaited)} not read yet.")
    kept = [
        f"{name} {value if isinstance(value, str) else number(value)}"
        for name, value in definition.fixed.items()
    ]
    told = f" ({joined(kept)})" if kept and fixed else ""
    held = f"Holds for this feed, resin lot, load and handling only{told}."
    return (*said, _AID, _PLATE, held, *(() if view.fresh else (_CHOSEN,)), _SAFETY)


_BENCH = (
    _AID,
    "Site procedures and licensed practice come first; this list replaces neither, nor the safety "
    "data sheets.",
    "Acids and caustic burn: eyes and hands protected, acid into water and never water into acid.",
    "Azide is toxic: never with acid, which sets a toxic, explosive gas free, and not down metal "
    "drains. Ethanol of slurries burns: no flame.",
    "Balance the rotor with a plate of the same mass and height, do not exceed what the plates "
    "stand, and wait until it has stopped.",
    "Keep bleach away from acid, ammonium salts and azide: toxic gas.",
)
_MILD = (4.0, 8.5)


def bench_cautions(ph: Iterable[float] = ()) -> tuple[str, ...]:
    """Return the cautions that go with the sheets of a plan of which the pH levels are given."""
    harsh = any(not _MILD[0] <= level <= _MILD[1] for level in ph)
    hold = (
        "Below pH 4 and above pH 8.5 a hold can aggregate the product: keep it short, neutralise."
    )
    return (*_BENCH, *((hold,) if harsh else ()))
