"""Plans and judges plate screens of chromatography conditions."""

from muntin import plots
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
