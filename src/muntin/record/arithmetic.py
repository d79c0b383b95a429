"""Arithmetic and comparisons over factor names, as a limit states them.

A text is parsed to a syntax tree, which is walked over a whitelist of nodes; nothing is evaluated
as code.
"""

from __future__ import annotations

import ast
import warnings
from collections.abc import Callable, Mapping, Sequence
from functools import lru_cache
from typing import Any

import numpy as np

from muntin.record.factors import Factor
from muntin.record.faults import did_you_mean, quoted

_MOST_SIGNS = 400
_MOST_DEPTH = 50
_SIGNS = str.maketrans({"≤": "<=", "≥": ">=", "≠": "!=", "−": "-", "·": "*", "×": "*"})

_ARITHMETIC: Mapping[type, Callable[[Any, Any], Any]] = {
    ast.Add: np.add,
    ast.Sub: np.subtract,
    ast.Mult: np.multiply,
    ast.Div: np.divide,
    ast.Pow: np.power,
}
_FUNCTIONS: Mapping[str, tuple[Callable[..., Any], int]] = {
    "min": (lambda *values: _fold(np.minimum, values), 0),
    "max": (lambda *values: _fold(np.maximum, values), 0),
    "abs": (np.abs, 1),
    "log": (np.log, 1),
    "exp": (np.exp, 1),
    "sqrt": (np.sqrt, 1),
}


class LimitError(ValueError):
    """The text is not a limit; the message continues "... " after the quoted text."""

    def __init__(self, problem: str, hint: str = "") -> None:
        self.problem, self.hint = problem, hint
        super().__init__(problem)


def check_limit(text: str, factors: Sequence[Factor]) -> None:
    """Raise LimitError unless `text` is a limit over these factors."""
    tree = _tree(text)
    if _kind(tree, {factor.name: factor for factor in factors}) is not bool:
        raise LimitError("is not a comparison", "write for example: salt <= 500")
    if not any(isinstance(node, ast.Name) and node.id not in _FUNCTIONS for node in ast.walk(tree)):
        raise LimitError("names no factor")


def holds(text: str, columns: Mapping[str, Any]) -> Any:
    """Return whether the limit holds, elementwise over the columns (raw units); NaN never holds.

    Raises LimitError where the text is not a limit, KeyError where a column is missing.
    """
    with np.errstate(all="ignore"):
        return _value(_tree(text), columns)


@lru_cache(maxsize=256)
def _tree(text: str) -> ast.expr:
    if len(text) > _MOST_SIGNS:
        raise LimitError(f"is longer than {_MOST_SIGNS} signs", "split it into several limits")
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            tree = ast.parse(text.translate(_SIGNS).strip(), mode="eval").body
    except (SyntaxError, ValueError, MemoryError, RecursionError):
        raise LimitError("is not arithmetic over factor names") from None
    if _too_deep(tree):
        raise LimitError("is nested too deeply", "split it into several limits")
    return tree


def _too_deep(tree: ast.expr) -> bool:
    layer: list[ast.AST] = [tree]
    for _ in range(_MOST_DEPTH):
        layer = [child for node in layer for child in ast.iter_child_nodes(node)]
        if not layer:
            return False
    return True


def _kind(node: ast.expr, factors: Mapping[str, Factor]) -> Any:
    """Return float, bool, str, or the Factor whose choice the node is; raise LimitError else."""
    match node:
        case ast.BoolOp(values=values):
            return _need(bool, values, factors, "and, or take comparisons on both sides")
        case ast.UnaryOp(op=ast.Not(), operand=operand):
            return _need(bool, [operand], factors, "not takes a comparison")
        case ast.Compare(left=left, ops=ops, comparators=others):
            for one, comparison, other in zip([left, *others], ops, others, strict=False):
                _check_comparison(one, comparison, other, factors)
            return bool
        case ast.Constant(value=value):
            return _constant_kind(value)
        case ast.Name(id=name):
            return _factor_kind(name, factors)
    return _arithmetic_kind(node, factors)


def _arithmetic_kind(node: ast.expr, factors: Mapping[str, Factor]) -> Any:
    match node:
        case ast.UnaryOp(op=ast.USub() | ast.UAdd(), operand=operand):
            return _need(float, [operand], factors, "arithmetic takes numbers")
        case ast.BinOp(left=left, op=op, right=right) if type(op) in _ARITHMETIC:
            return _need(float, [left, right], factors, "arithmetic takes numbers")
        case ast.BinOp(op=ast.BitXor()):
            raise LimitError("is not arithmetic over factor names", "write ** for a power")
        case ast.Call(func=ast.Name(id=name), args=args, keywords=[]) if name in _FUNCTIONS:
            count = _FUNCTIONS[name][1]
            if len(args) != count if count else len(args) < 2:
                raise LimitError(f"gives {name} the wrong number of values")
            return _need(float, args, factors, f"{name} takes numbers")
    raise LimitError("is not arithmetic over factor names")


def _need(kind: type, nodes: list[ast.expr], factors: Mapping[str, Factor], hint: str) -> type:
    if any(_kind(node, factors) is not kind for node in nodes):
        raise LimitError("mixes numbers, choices and comparisons", hint)
    return kind


def _constant_kind(value: object) -> type:
    if isinstance(value, str):
        return str
    if isinstance(value, bool) or not isinstance(value, int | float):
        raise LimitError("is not arithmetic over factor names")
    try:
        float(value)
    except OverflowError:
        raise LimitError("holds a number that is too large") from None
    return float


def _factor_kind(name: str, factors: Mapping[str, Factor]) -> Any:
    if name in factors:
        return float if factors[name].continuous else factors[name]
    known = [*factors]
    raise LimitError(f"names {quoted(name)}, which is no factor", did_you_mean(name, known))


def _check_comparison(
    left: ast.expr, op: ast.cmpop, right: ast.expr, factors: Mapping[str, Factor]
) -> None:
    one = _kind(left, factors)
    if isinstance(op, ast.In | ast.NotIn):
        if not isinstance(right, ast.Tuple | ast.List | ast.Set):
            raise LimitError("has an in without a list", 'write for example: resin in ("A", "B")')
        for item in right.elts:
            _check_choice(one, item, factors)
        return
    if not isinstance(op, ast.Lt | ast.LtE | ast.Gt | ast.GtE | ast.Eq | ast.NotEq):
        raise LimitError("is not arithmetic over factor names")
    other = _kind(right, factors)
    if one is float and other is float:
        return
    if not isinstance(op, ast.Eq | ast.NotEq):
        raise LimitError("mixes numbers, choices and comparisons", "choices take ==, != or in")
    if isinstance(one, Factor):
        _check_choice(one, right, factors)
    else:
        _check_choice(other, left, factors)


def _check_choice(factor: Any, node: ast.expr, factors: Mapping[str, Factor]) -> None:
    if not isinstance(factor, Factor) or _kind(node, factors) is not str:
        raise LimitError(
            "mixes numbers, choices and comparisons", 'compare a choice with text: resin == "A"'
        )
    choices = factor.choices or ()
    if isinstance(node, ast.Constant) and node.value not in choices:
        raise LimitError(
            f"compares {factor.name} with {quoted(node.value)}, which is not among its choices",
            did_you_mean(str(node.value), choices),
        )


def _value(node: ast.expr, columns: Mapping[str, Any]) -> Any:
    match node:
        case ast.BoolOp(op=op, values=values):
            join = np.logical_and if isinstance(op, ast.And) else np.logical_or
            return _fold(join, [_value(value, columns) for value in values])
        case ast.UnaryOp(op=ast.Not(), operand=operand):
            return np.logical_not(_value(operand, columns))
        case ast.UnaryOp(op=op, operand=operand):
            inner = _value(operand, columns)
            return np.negative(inner) if isinstance(op, ast.USub) else inner
        case ast.BinOp(left=left, op=op, right=right) if type(op) in _ARITHMETIC:
            return _ARITHMETIC[type(op)](_value(left, columns), _value(right, columns))
        case ast.Compare(left=left, ops=ops, comparators=others):
            pairs = zip([left, *others], ops, others, strict=False)
            return _fold(np.logical_and, [_compared(*pair, columns) for pair in pairs])
        case ast.Call(func=ast.Name(id=name), args=args) if name in _FUNCTIONS:
            return _FUNCTIONS[name][0](*(_value(arg, columns) for arg in args))
        case ast.Constant(value=str() as text):
            return text
        case ast.Constant(value=int() | float() as value):
            return np.float64(value)
        case ast.Name(id=name):
            return columns[name]
    raise LimitError("is not arithmetic over factor names")


def _compared(left: ast.expr, op: ast.cmpop, right: ast.expr, columns: Mapping[str, Any]) -> Any:
    one = _value(left, columns)
    if isinstance(op, ast.In | ast.NotIn):
        items = right.elts if isinstance(right, ast.Tuple | ast.List | ast.Set) else []
        found = _fold(np.logical_or, [np.False_, *(one == _value(item, columns) for item in items)])
        return np.logical_not(found) if isinstance(op, ast.NotIn) else found
    other = _value(right, columns)
    if _is_text(one) or _is_text(other):
        same = np.asarray(one == other)
        return np.logical_not(same) if isinstance(op, ast.NotEq) else same
    return _numbers_compared(np.asarray(one, float), op, np.asarray(other, float))


def _is_text(value: Any) -> bool:
    return isinstance(value, str) or np.asarray(value).dtype.kind in "OUT"


def _numbers_compared(one: Any, op: ast.cmpop, other: Any) -> Any:
    # Bench steps such as 5.3 are not exact in binary; a limit met to 1e-9 is met.
    size = np.maximum(1.0, np.maximum(np.abs(one), np.abs(other)))
    slack = np.where(np.isfinite(size), 1e-9 * size, 0.0)
    equal = (np.abs(one - other) <= slack) | (one == other)
    match op:
        case ast.Lt():
            return (one < other) & ~equal
        case ast.LtE():
            return (one < other) | equal
        case ast.Gt():
            return (one > other) & ~equal
        case ast.GtE():
            return (one > other) | equal
        case ast.NotEq():
            return ~equal
    return equal


def _fold(join: Callable[[Any, Any], Any], values: Sequence[Any]) -> Any:
    result = values[0]
    for value in values[1:]:
        result = join(result, value)
    return result
