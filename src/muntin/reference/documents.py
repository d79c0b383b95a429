"""All fields of JSON documents."""

from __future__ import annotations

from muntin.reference.fields_columns import CONFIRM
from muntin.reference.fields_handover import HANDOVER
from muntin.reference.fields_plans import PLAN, PREPARE, PROPOSE
from muntin.reference.fields_reads import REDUCE, REDUCTION, UPTAKE
from muntin.reference.fields_record import RECORD
from muntin.reference.fields_rehearsal import REHEARSE
from muntin.reference.fields_study import ASSESS, CHECK, FAULT, SETTINGS, STANDING, STUDY
from muntin.reference.part import Part

_COMMANDS = (
    "new",
    "check",
    "reduce",
    "uptake",
    "assess",
    "propose",
    "prepare",
    "rehearse",
    "advise",
    "confirm",
    "report",
    "verify",
    "help",
)
_EVERY = Part(_COMMANDS, {"command": "the command that was run"})
_REMARKS = Part(
    ("reduce", "uptake", "prepare", "rehearse", "confirm", "report"),
    {
        "remarks": "what there is to say of the ledger and of earlier commands that were cut off; "
        "left out where there is nothing"
    },
)
_NEW = Part(("new",), {"files": "files written"})
_HELP = Part(
    ("help",),
    {
        "name": "the name that was asked for; null where none was",
        "found": "what bears the name, or everything where none was asked for",
        "found[].kind": "command, argument, option, section, key, table, column or field",
        "found[].name": "its full name",
        "found[].of": "what it belongs to; empty for what stands by itself",
        "found[].says": "what it means",
        "found[].more": "type, unit, default, what is allowed, an example",
        "found[].more.<label>": "one of these, as shown",
    },
)

PARTS = (
    FAULT,
    _EVERY,
    _REMARKS,
    *SETTINGS,
    STUDY,
    CHECK,
    STANDING,
    ASSESS,
    HANDOVER,
    PLAN,
    PROPOSE,
    *RECORD,
    PREPARE,
    REDUCE,
    REDUCTION,
    UPTAKE,
    REHEARSE,
    CONFIRM,
    _NEW,
    _HELP,
)


def fields_of(document: str) -> dict[str, str]:
    """Return the fields of one document by path."""
    parts = [part.fields for part in PARTS if document in part.documents]
    return {name: says for fields in parts for name, says in fields.items()}
