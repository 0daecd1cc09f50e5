"""Text becomes a checked expression with value, gradient, Hessian, dimensions and a typeset formula."""

from calibrate.expressions.errors import ExpressionError
from calibrate.expressions.expression import (
    Comparison,
    Expression,
    constant_expression,
    parse,
    parse_comparison,
)
from calibrate.expressions.program import Program
from calibrate.expressions.syntax import FUNCTIONS, RESERVED_NAMES

__all__ = [
    "FUNCTIONS",
    "RESERVED_NAMES",
    "Comparison",
    "Expression",
    "ExpressionError",
    "Program",
    "constant_expression",
    "parse",
    "parse_comparison",
]
