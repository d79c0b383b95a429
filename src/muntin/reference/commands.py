"""Entries of commands, arguments and options, from their declarations in commands/."""

from __future__ import annotations

import inspect
import typing
from collections.abc import Callable, Iterator, Mapping
from enum import Enum
from typing import Any

from typer.models import OptionInfo, ParameterInfo

from muntin.reference.entry import Entry

_TAKES = {str: "TEXT", int: "N", float: "NUMBER"}


def command_entries(commands: Mapping[Callable[..., Any], str]) -> Iterator[Entry]:
    """Yield the entries of commands, each with the question that it answers, one by one.

    Raises ValueError for an argument or option without help.
    """
    for work, question in commands.items():
        name, parameters = work.__name__, [*inspect.signature(work).parameters.values()]
        told = [_parameter(name, parameter) for parameter in parameters]
        shown = [_shown(p) for p, e in zip(parameters, told, strict=True) if e.kind == "argument"]
        usage = " ".join(["muntin", name, *shown, "[options]"])
        says = " ".join(inspect.cleandoc(work.__doc__ or "").split())
        yield Entry(kind="command", name=name, says=says, more={"usage": usage, "asks": question})
        yield from told


def _parameter(command: str, parameter: inspect.Parameter) -> Entry:
    kind, info = _declared(parameter)
    option = isinstance(info, OptionInfo)
    name = _option_name(parameter, info)
    if not info.help:
        raise ValueError(f"{name} of {command} has no help")
    return Entry(
        kind="option" if option else "argument",
        name=name if option else _shown(parameter).strip("[]"),
        says=info.help,
        of=command,
        more=_more(kind, info, parameter.default),
    )


def _option_name(parameter: inspect.Parameter, info: ParameterInfo) -> str:
    """The name that is declared, else that of the parameter; in Annotated typer keeps the first
    declared name as the default.
    """
    given = [text for text in (info.default, *(info.param_decls or ())) if isinstance(text, str)]
    long = [text for text in given if text.startswith("--")]
    return long[0] if long else f"--{parameter.name.replace('_', '-')}"


def _declared(parameter: inspect.Parameter) -> tuple[Any, ParameterInfo]:
    """The type of a parameter without None, and its declaration."""
    kind, info = typing.get_args(parameter.annotation)[:2]
    inner = [part for part in typing.get_args(kind) if part is not type(None)]
    return (inner[0] if inner else kind), info


def _more(kind: Any, info: ParameterInfo, default: Any) -> dict[str, str]:
    if kind is bool:
        return {}
    more: dict[str, str] = {}
    if isinstance(kind, type) and issubclass(kind, Enum):
        more["one of"] = ", ".join(str(choice.value) for choice in kind)
    elif isinstance(info, OptionInfo):
        more["takes"] = info.metavar or _TAKES[kind]
    if info.min is not None:
        most = f" to {info.max:.10g}" if info.max is not None else " or more"
        more["range"] = f"{info.min:.10g}{most}"
    if default is not None and default is not inspect.Parameter.empty:
        more["default"] = str(getattr(default, "value", default))
    return more


def _shown(parameter: inspect.Parameter) -> str:
    """An argument as it stands in the usage: DIR, [PLAN]."""
    _, info = _declared(parameter)
    name = str(info.metavar or parameter.name.upper()).strip("[]")
    return name if parameter.default is inspect.Parameter.empty else f"[{name}]"
