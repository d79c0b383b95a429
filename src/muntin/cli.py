"""The command line: registers the commands, nothing else."""

from __future__ import annotations

import sys
from typing import Annotated

import typer

from muntin.commands.advise import advise
from muntin.commands.assess import assess
from muntin.commands.check import check
from muntin.commands.confirm import confirm
from muntin.commands.help import help as tell_names
from muntin.commands.new import new
from muntin.commands.prepare import prepare
from muntin.commands.propose import propose
from muntin.commands.reduce import reduce
from muntin.commands.rehearse import rehearse
from muntin.commands.report import report
from muntin.commands.uptake import uptake
from muntin.commands.verify import verify

COMMANDS = {
    new: "where do I start?",
    check: "are my files sound?",
    reduce: "what did the wells do?",
    uptake: "how long must they be in contact?",
    assess: "where do I stand?",
    propose: "what do I run next?",
    prepare: "how do I run it?",
    rehearse: "is another plate worth it?",
    confirm: "do columns agree?",
    report: "can I hand it over?",
    verify: "can I reproduce it?",
    advise: "all of it between two plates",
    tell_names: "what does a name mean?",
}

app = typer.Typer(
    name="muntin",
    help="Plans the next plate and judges the operating window, plate by plate.",
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
    context_settings={"help_option_names": ["-h", "--help"]},
)
for _work, _question in COMMANDS.items():
    app.command(short_help=_question)(_work)


@app.callback(invoke_without_command=True)
def _start(
    context: typer.Context,
    version: Annotated[bool, typer.Option("--version", help="print the version")] = False,
) -> None:
    if version:
        from importlib.metadata import version as installed

        typer.echo(f"muntin {installed('muntin')}")
    elif context.invoked_subcommand is None:
        typer.echo(context.get_help())


def main() -> None:
    """Run the command line: exit 0 done, 2 the input is at fault, 1 anything else."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    app()
