"""Text becomes a checked expression with value, gradient, Hessian, dimensions and a typeset formula."""

from calibrate.expressions.dimensions import dimension_of, dimension_of_comparison, infer_dimension
from calibrate.expressions.errors import ExpressionError
from calibrate.expressions.expression import (
    Comparison,
    Expression,
    constant_expression,
    parse,
    parse_comparison,
)
from calibrate.expressions.mathml import name_mathml
from calibrate.expressions.plain import name_plain
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
    "dimension_of",
    "dimension_of_comparison",
    "infer_dimension",
    "name_mathml",
    "name_plain",
    "parse",
    "parse_comparison",
]
