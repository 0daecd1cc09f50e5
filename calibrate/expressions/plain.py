"""Prints a syntax tree on one line of Unicode text, for the console."""

from __future__ import annotations

from calibrate.expressions.symbols import GREEK
from calibrate.expressions.syntax import Node, Tree

_COMPARISON, _SUM, _SIGNED, _PRODUCT, _POWER, _ATOM = range(6)
_SIGNS = {"+": "+", "-": "−", "*": "·", "/": "/", ">=": "≥", "<=": "≤"}
_SUPERSCRIPTS = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")
_LEVEL = {"+": _SUM, "-": _SUM, "*": _PRODUCT, "/": _PRODUCT, ">=": _COMPARISON, "<=": _COMPARISON}

Part = tuple[str, int]


def plain(tree: Tree) -> str:
    """Return text such as ``A_d · f_uk / γ_M ≥ γ_G · G_k``."""
    at: list[Part] = []
    for node in tree:
        at.append(_print(node, [at[c] for c in node.children]))
    return at[-1][0]


def name_plain(name: str) -> str:
    """Return a name with Greek letters for their names."""
    return "_".join(GREEK.get(part, part) for part in name.split("_"))


def _print(node: Node, parts: list[Part]) -> Part:
    match node.op:
        case "number":
            return node.name, _ATOM
        case "pi":
            return "π", _ATOM
        case "name":
            return name_plain(node.name), _ATOM
        case "pos":
            return parts[0]
        case "neg":
            return f"−{_bracketed(parts[0], _PRODUCT)}", _SIGNED
        case "**":
            return _power(parts[0], parts[1]), _POWER
        case "sqrt":
            return f"√({parts[0][0]})", _ATOM
        case op if op in _LEVEL:
            return _joined(op, parts[0], parts[1]), _LEVEL[op]
        case op:
            return f"{op}({', '.join(p[0] for p in parts)})", _ATOM


def _bracketed(part: Part, least: int) -> str:
    return part[0] if part[1] >= least else f"({part[0]})"


def _joined(op: str, left: Part, right: Part) -> str:
    level = _LEVEL[op]
    # a sum or product may follow a '+' or '·' openly, anything like it after '−' or '/' may not
    open_right = op in {"+", "*", ">=", "<="} and right[1] == level and not (op == "*" and "/" in right[0])
    first = left[0] if level <= _SUM else _bracketed(left, level)
    last = right[0] if open_right or level == _COMPARISON else _bracketed(right, max(level + 1, _PRODUCT))
    return f"{first} {_SIGNS[op]} {last}"


def _power(base: Part, exponent: Part) -> str:
    shown = _bracketed(base, _ATOM)
    if exponent[0].isascii() and exponent[0].isdigit():
        return shown + exponent[0].translate(_SUPERSCRIPTS)
    return f"{shown}^{_bracketed(exponent, _ATOM)}"
