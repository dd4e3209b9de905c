"""A volume equation that a person typed: arithmetic and nothing else.

In: text such as `f * pi / 4 * d_m ** 2 * h_m`. Out: a function of numbers. The text is read as a
tree and only numbers, the known names, + - * / ** and four functions are let through, so that a
file of constants can do nothing but arithmetic.
"""

from __future__ import annotations

import ast
import math
from collections.abc import Callable
from dataclasses import dataclass

from fieldround.rounds.errors import Fault, SheetsError
from fieldround.trade.constants import FILE, Constant

NAMES = ("d_m", "d_cm", "h_m", "f", "pi")
_FUNCTIONS: dict[str, Callable[[float], float]] = {
    "exp": math.exp,
    "log": math.log,
    "log10": math.log10,
    "sqrt": math.sqrt,
}
_OPERATORS = (ast.Add, ast.Sub, ast.Mult, ast.Div, ast.Pow)


@dataclass(frozen=True)
class Equation:
    """An equation that was checked; call it with its names."""

    text: str
    names: frozenset[str]
    tree: ast.Expression

    @classmethod
    def of(cls, constant: Constant) -> Equation:
        """The equation of a constant.

        raises : SheetsError when it is anything but arithmetic of the known names
        """
        text = str(constant.value)
        try:
            tree = ast.parse(text.strip(), mode="eval")
            names = frozenset(_checked(tree.body))
        except (SyntaxError, ValueError, RecursionError) as error:
            said = str(error) if isinstance(error, ValueError) else "cannot be read"
            remedy = (
                f"{said}; write arithmetic of {', '.join(NAMES)} with + - * / ** and "
                f"{', '.join(_FUNCTIONS)}"
            )
            raise SheetsError([Fault(FILE, None, constant.key, text, remedy)]) from error
        return cls(text, names, tree)

    def __call__(self, **values: float) -> float:
        """The value; NaN where the arithmetic has none (a logarithm of nothing)."""
        try:
            return float(_value(self.tree.body, {"pi": math.pi, **values}))
        except (ValueError, ZeroDivisionError, OverflowError, TypeError):
            return math.nan


def _checked(node: ast.expr) -> set[str]:
    """The names of an expression; ValueError for whatever is not arithmetic."""
    if isinstance(node, ast.Constant) and type(node.value) in (int, float):
        return set()
    if isinstance(node, ast.Name):
        if node.id not in NAMES:
            raise ValueError(f"{node.id!r} is not known")
        return {node.id}
    if isinstance(node, ast.BinOp) and isinstance(node.op, _OPERATORS):
        return _checked(node.left) | _checked(node.right)
    if isinstance(node, ast.UnaryOp) and isinstance(node.op, ast.USub | ast.UAdd):
        return _checked(node.operand)
    if (
        isinstance(node, ast.Call)
        and isinstance(node.func, ast.Name)
        and node.func.id in _FUNCTIONS
        and len(node.args) == 1
        and not node.keywords
    ):
        return _checked(node.args[0])
    raise ValueError(f"{ast.unparse(node)!r} is not arithmetic")


def _value(node: ast.expr, values: dict[str, float]) -> float:
    if isinstance(node, ast.Constant):
        return float(node.value)  # type: ignore[arg-type]
    if isinstance(node, ast.Name):
        return values[node.id]
    if isinstance(node, ast.UnaryOp):
        inner = _value(node.operand, values)
        return -inner if isinstance(node.op, ast.USub) else inner
    if isinstance(node, ast.Call):
        assert isinstance(node.func, ast.Name)
        return _FUNCTIONS[node.func.id](_value(node.args[0], values))
    assert isinstance(node, ast.BinOp)
    left, right = _value(node.left, values), _value(node.right, values)
    if isinstance(node.op, ast.Add):
        return left + right
    if isinstance(node.op, ast.Sub):
        return left - right
    if isinstance(node.op, ast.Mult):
        return left * right
    if isinstance(node.op, ast.Div):
        return left / right
    return math.pow(left, right)
