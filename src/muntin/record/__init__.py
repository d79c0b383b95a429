"""Files of a study: what is asked, what was run, what is at fault."""

from muntin.record.definition import Definition
from muntin.record.faults import Fault, StudyFaults
from muntin.record.files import write_atomic
from muntin.record.notes import Plate
from muntin.record.study import Counts, Study, keep_stop_rule, open_study
from muntin.record.template import new_study

__all__ = [
    "Counts",
    "Definition",
    "Fault",
    "Plate",
    "Study",
    "StudyFaults",
    "keep_stop_rule",
    "new_study",
    "open_study",
    "write_atomic",
]
