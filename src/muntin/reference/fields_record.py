"""JSON fields of what goes on record: advice, the page, the ledger, and what verify finds."""

from __future__ import annotations

from muntin.reference.part import Part

_BOTH = Part(
    ("advise", "report"),
    {
        "written_at": "time of writing, UTC",
        "by": "who asked for it, as named by --by; null where nobody was",
        "versions": "versions that the numbers depend on",
        "versions.<package>": "version of a package or of python, or the kind of processor",
        "inputs": "SHA-256 of each input file",
        "inputs.<file>": "SHA-256 of the file",
        "changes": "what differs from earlier advice",
        "changes.said": "the differences that nobody had explained before, in sentences",
        "ledger": "the line of ledger.jsonl about it; null where the study cannot be written",
        "ledger.line": "its number",
        "ledger.before": "hash of the line before; empty for the first",
        "cautions": "what to keep in mind",
    },
)
_ADVISE = Part(
    ("advise",),
    {
        "changes.because": "the reason given for them (--because); null where none was",
        "predicted": "what each planned well is expected to read",
        "predicted[].well": "the well",
        "predicted[].response": "the response",
        "predicted[].low": "lower end of the central 95 % of its reading, in the response's unit",
        "predicted[].predicted": "middle of it",
        "predicted[].high": "upper end",
        "files": "where it was written",
        "files.plan": "the plan's table",
        "files.advice": "folder of the revision: map, numbers, copy of the inputs",
        "files.remark": "what to know of the plan's name",
    },
)
_REPORT = Part(
    ("report",),
    {
        "standing": "how far the study is, in a word or two, as on top of the page",
        "answer": "the answer of the page, in sentences",
        "unplanned": "why no next plate can be planned; empty where there is one",
        "put_back": "what the study says with all that was left out put back; null where nothing "
        "was",
        "put_back.readings": "readings that were put back",
        "put_back.unknown": "why that cannot be told; empty where it can",
        "put_back.share": "share of the range inside the window then",
        "put_back.wrong_share": "share that may still be called wrongly then",
        "put_back.set_point": "the condition of highest judged probability then",
        "put_back.set_point.<factor>": "its value of the factor",
        "put_back.set_point.probability": "its judged probability",
        "changes.since": "what they differ from: an advice, or a command and its day",
        "changes.left_out": "what that advice rested on and was left out since, with a reason, in "
        "sentences",
        "changes.explained": "changes for which a reason was given, oldest first",
        "changes.explained[].line": "number of the line of ledger.jsonl that has it",
        "changes.explained[].time": "when, UTC",
        "changes.explained[].by": "who gave it",
        "changes.explained[].because": "the reason",
        "changes.explained[].said": "what was changed, in sentences",
        "files": "files written: the page, its record, its figures",
    },
)
_PAGE = Part(
    ("report/report.json",),
    {
        "written": "SHA-256 of page and figures as written; the other fields are those of report",
        "written.<file>": "SHA-256 of the file",
        "replaced": "SHA-256 of what was there before and was written by muntin too",
        "replaced.<file>": "SHA-256 of the file",
    },
)
_VERIFY = Part(
    ("verify",),
    {
        "clean": "whether nothing differs",
        "tolerance": "numbers agree within this, or within this share of those above 1",
        "title": "the study's title",
        "lines": "lines of the ledger",
        "advice": "every advice on record, oldest first",
        "advice[].folder": "its folder in the study",
        "advice[].values": "values that were recomputed and compared; null where none were",
        "advice[].differs": "what differs, in sentences",
        "advice[].notes": "what is to be noted, in sentences",
        "differs": "all that differs: ledger, files, advice, the study as it is now, in sentences",
        "notes": "all that is to be noted, in sentences",
    },
)
_LEDGER = Part(
    ("ledger.jsonl",),
    {
        "number": "number of the line, from 1",
        "time": "when it was written, UTC",
        "command": "the command that was run",
        "by": "who ran it, as named by --by; null where nobody was",
        "settings": "what the command was asked",
        "settings.<option>": "an option or argument of the command",
        "seed": "its seed; null where it needs none",
        "inputs": "SHA-256 of each file that it read",
        "inputs.<file>": "SHA-256 of the file",
        "versions": "versions that the numbers depend on",
        "versions.<package>": "version of a package or of python, or the kind of processor",
        "asked": "what study.toml asked for: targets, factors, priors, required probability; empty "
        "where the command does not judge by it",
        "asked.<key>": "key of study.toml, or its entries by name",
        "results": "SHA-256 of each file that was written with the line",
        "results.<file>": "SHA-256 of the file; its whole path where it lies outside the study",
        "removed": "files that were taken away with the line",
        "decision": "what was decided, such as the verdict on another plate; null for nothing",
        "decision.<what>": "the plate, the verdict, why, its wells, the plan that was edited",
        "changes": "what differed from earlier advice, in sentences",
        "because": "the reason given for that; null where none was",
        "before": "SHA-256 of the line before; empty for the first",
        "sha256": "SHA-256 of the line itself without this field, its keys in order",
    },
)

RECORD = (_BOTH, _ADVISE, _REPORT, _PAGE, _VERIFY, _LEDGER)
