"""Plans and judges plate screens of chromatography conditions."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from muntin import plots as plots
    from muntin.bench.plan import Plan, propose
    from muntin.record import Study, StudyFaults, new_study, open_study
    from muntin.rehearsal.rehearse import Rehearsal, rehearse
    from muntin.window.assessment import Assessment, assess
    from muntin.window.window import Window

__version__ = "0.1.0"

__all__ = [
    "Assessment",
    "Plan",
    "Rehearsal",
    "Study",
    "StudyFaults",
    "Window",
    "assess",
    "new_study",
    "open_study",
    "plots",
    "propose",
    "rehearse",
]
_HOMES = {
    "muntin.bench.plan": ("Plan", "propose"),
    "muntin.record": ("Study", "StudyFaults", "new_study", "open_study"),
    "muntin.rehearsal.rehearse": ("Rehearsal", "rehearse"),
    "muntin.window.assessment": ("Assessment", "assess"),
    "muntin.window.window": ("Window",),
}
# Public modules, such as those of figures.
_MODULES = ("plots",)


def __getattr__(name: str) -> Any:
    """Import a public name when it is first used, so that small commands start at once."""
    from importlib import import_module

    for home, names in _HOMES.items():
        if name in names:
            globals()[name] = value = getattr(import_module(home), name)
            return value
    if name in _MODULES:
        return import_module(f"{__name__}.{name}")
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return [*__all__, "__version__"]
