"""Text becomes a syntax tree, or a refusal that names the column.

The parser is our own, plain precedence climbing over the words: nothing that
a user writes ever reaches Python's compiler, the refusals can speak the
user's language, and the time is linear in the text, whose length and depth
are limited beforehand.  Binding and associativity are those of Python.
"""

from __future__ import annotations

import functools
import keyword
import math
from dataclasses import replace

import numpy as np

from calibrate.errors import did_you_mean
from calibrate.expressions import syntax
from calibrate.expressions.errors import ExpressionError, refuse
from calibrate.expressions.operations import OPERATIONS
from calibrate.expressions.syntax import FUNCTIONS, NOT_FINITE, Node, Tree
from calibrate.expressions.tokens import Token, tokens

_BINDING = {"+": 1, "-": 1, "*": 2, "/": 2}
_SENSES = (">=", "<=")


def read(text: str, *, comparison: bool = False, derived: bool = False) -> Tree:
    """Parse a text.

    Parameters
    ----------
    text : str
    comparison : bool
        Whether the text must be a comparison; otherwise it must not be one.
    derived : bool
        The text was made from accepted text, by adding a sign and brackets:
        the limits are a little wider.

    Raises
    ------
    ExpressionError
    """
    if len(text) > syntax.MAX_CHARACTERS + 8 * derived:
        raise refuse(
            f"an expression has at most {syntax.MAX_CHARACTERS} characters, this one has {len(text)}",
            text,
            syntax.MAX_CHARACTERS,
            suggestion="Split it with further quantities.",
        )
    return _Parser(text, tokens(text), syntax.MAX_DEPTH + derived).run(comparison)


class _Parser:
    """Precedence climbing over the tokens; nodes are appended in post-order."""

    def __init__(self, text: str, tokens: list[Token], most: int) -> None:
        self.text = text
        self.tokens = tokens
        self.place = 0
        self.nodes: list[Node] = []
        self.towers: list[int] = []
        self.depth = 0
        self.most = most

    @property
    def token(self) -> Token:
        return self.tokens[self.place]

    def take(self) -> Token:
        token = self.token
        self.place += 1
        return token

    def error(
        self, message: str, start: int, end: int | None = None, hint: str | None = None
    ) -> ExpressionError:
        return refuse(message, self.text, start, end, hint)

    def run(self, comparison: bool) -> Tree:
        if self.token.kind == "end":
            raise self.error("the expression is empty", 0)
        root = self.condition()
        if self.token.kind != "end":
            raise self.unexpected(self.token)
        node = self.nodes[root]
        if node.op in _SENSES:
            if not comparison:
                sense = self.sense_of(root)
                raise self.error(
                    f"a value is expected here, not a comparison with '{node.op}'", sense, sense + 2
                )
        elif comparison:
            raise self.error(
                "a comparison with '>=' or '<=' is expected", node.start, node.end, "Write 'left >= right'."
            )
        return tuple(self.nodes)

    def unexpected(self, token: Token) -> ExpressionError:
        previous = self.tokens[self.place - 1]
        if token.text == ")":
            return self.error("this bracket closes nothing", token.start)
        if token.text == ",":
            return self.error("a comma is used only between the arguments of a function", token.start)
        if token.text in keyword.kwlist:
            return self.keyword(token)
        hint = None
        if previous.kind in {"number", "name"} and token.kind == "name":
            hint = f"Write '{previous.text} * {token.text}' for a product; expressions contain no units."
        elif token.text == "(" or token.kind in {"number", "name"}:
            hint = "A product needs '*'."
        return self.error(f"an operator is missing before '{token.text}'", token.start, token.end, hint)

    def keyword(self, token: Token) -> ExpressionError:
        hint = {
            "if": "Write 'where(condition, value, other value)'.",
            "else": "Write 'where(condition, value, other value)'.",
            "and": "Compare one pair; combine with min(...) or max(...).",
            "or": "Compare one pair; combine with min(...) or max(...).",
            "not": "Turn the comparison round.",
            "True": "Write 1.",
            "False": "Write 0.",
        }.get(token.text)
        return self.error(f"'{token.text}' is a reserved word", token.start, token.end, hint)

    # ---------------------------------------------------------------- grammar

    def condition(self) -> int:
        """A value, or one comparison of two values."""
        left = self.sum(0)
        if self.token.text not in _SENSES:
            return left
        sense = self.take()
        self.value(left)
        right = self.value(self.sum(0))
        if self.token.text in _SENSES:
            raise self.error(
                "comparisons cannot be chained", self.token.start, self.token.end, "Compare one pair only."
            )
        a, b = self.nodes[left], self.nodes[right]
        return self.add(Node(sense.text, (left, right), a.start, b.end))

    def sum(self, binding: int) -> int:
        left = self.signed()
        while (power := _BINDING.get(self.token.text, 0)) > binding:
            operator = self.take().text
            self.value(left)
            right = self.value(self.sum(power))
            left = self.combine(operator, (left, right), self.nodes[left].start, self.nodes[right].end)
        return left

    def signed(self) -> int:
        if self.token.text not in {"+", "-"}:
            return self.power()
        sign = self.take()
        self.deeper(sign)
        operand = self.value(self.signed())
        self.depth -= 1
        op = "neg" if sign.text == "-" else "pos"
        return self.combine(op, (operand,), sign.start, self.nodes[operand].end)

    def power(self) -> int:
        base = self.atom()
        if self.token.text != "**":
            return base
        self.deeper(self.take())
        self.value(base)
        exponent = self.value(self.signed())
        self.depth -= 1
        node = self.nodes[exponent]
        if node.constant is not None and abs(node.constant) > syntax.MAX_EXPONENT:
            raise self.error(
                f"an exponent may be at most {syntax.MAX_EXPONENT:g} in size, this one is {node.constant:g}",
                node.start,
                node.end,
            )
        if self.towers[exponent] > 1:
            raise self.error("powers are stacked more than two high", node.start, node.end)
        return self.combine("**", (base, exponent), self.nodes[base].start, node.end)

    def atom(self) -> int:
        token = self.take()
        if token.kind == "number":
            value = float(token.text)
            return self.add(Node("number", (), token.start, token.end, token.text, value))
        if token.kind == "name":
            return self.named(token)
        if token.text == "(":
            self.deeper(token)
            inner = self.condition()
            closing = self.close(token)
            self.depth -= 1
            self.nodes[inner] = replace(self.nodes[inner], start=token.start, end=closing.end)
            return inner
        if token.kind == "end":
            raise self.error("the expression ends where a value is expected", token.start)
        raise self.error(f"a value is expected here, not '{token.text}'", token.start, token.end)

    def named(self, token: Token) -> int:
        name = token.text
        called = self.token.text == "("
        if name in keyword.kwlist:
            raise self.keyword(token)
        if name in NOT_FINITE:
            raise self.error(f"'{name}' is not a finite number", token.start, token.end)
        if name in FUNCTIONS:
            if not called:
                raise self.error(
                    f"the function '{name}' needs its arguments in brackets", token.start, token.end
                )
            return self.call(token)
        if called:
            if name == "pi":
                raise self.error(
                    "'pi' is a number, not a function", token.start, token.end, "Write 'pi * (...)'."
                )
            hint = did_you_mean(name, FUNCTIONS)
            raise self.error(f"unknown function '{name}'", token.start, token.end, hint)
        if name == "pi":
            return self.add(Node("pi", (), token.start, token.end, name, math.pi))
        return self.add(Node("name", (), token.start, token.end, name))

    def call(self, token: Token) -> int:
        opening = self.take()
        self.deeper(opening)
        arguments: list[int] = []
        while self.token.text != ")":
            argument = self.condition()
            if token.text == "where" and not arguments:
                if self.nodes[argument].op not in _SENSES:
                    node = self.nodes[argument]
                    raise self.error(
                        "'where' begins with a comparison",
                        node.start,
                        node.end,
                        "Write 'where(a >= b, value if so, value if not)'.",
                    )
            else:
                self.value(argument)
            arguments.append(argument)
            if self.token.text != ",":
                break
            comma = self.take()
            if self.token.text == ")":
                raise self.error("an argument is missing after this comma", comma.start)
        closing = self.close(opening)
        self.depth -= 1
        least, most = FUNCTIONS[token.text]
        if not least <= len(arguments) <= most:
            wanted = f"{least} or more arguments" if most > least else f"{least} argument{'s' * (least > 1)}"
            raise self.error(
                f"'{token.text}' takes {wanted}, here are {len(arguments) or 'none'}",
                token.start,
                closing.end,
            )
        return self.combine(token.text, tuple(arguments), token.start, closing.end)

    # ---------------------------------------------------------------- helpers

    def close(self, opening: Token) -> Token:
        if self.token.text == ")":
            return self.take()
        if self.token.kind == "end":
            raise self.error("this bracket is never closed", opening.start)
        if self.token.text == ",":
            raise self.error("a comma is used only between the arguments of a function", self.token.start)
        raise self.unexpected(self.token)

    def deeper(self, token: Token) -> None:
        self.depth += 1
        if self.depth > self.most:
            raise self.error(
                f"brackets, signs and powers are nested more than {syntax.MAX_DEPTH} deep", token.start
            )

    def sense_of(self, index: int) -> int:
        """Position of the comparison sign of a comparison."""
        return self.text.index(self.nodes[index].op, self.nodes[self.nodes[index].children[0]].end)

    def value(self, index: int) -> int:
        node = self.nodes[index]
        if node.op in _SENSES:
            raise self.error(
                "a comparison cannot be used as a value",
                node.start,
                node.end,
                "Use 'where(comparison, value if so, value if not)'.",
            )
        return index

    def combine(self, op: str, children: tuple[int, ...], start: int, end: int) -> int:
        """Add an operation; where all below is constant, its value, which must be finite."""
        if op == "where":
            a, b = self.nodes[children[0]].children
            below = [self.nodes[c].constant for c in (a, b, *children[1:])]
        else:
            below = [self.nodes[c].constant for c in children]
        known = [c for c in below if c is not None]
        constant = None
        if len(known) == len(below):
            sense = self.nodes[children[0]].op if op == "where" else ""
            constant = _fold(op, sense, known)
            if not math.isfinite(constant):
                raise self.error(f"'{self.text[start:end]}' has no finite value", start, end)
        return self.add(Node(op, children, start, end, "", constant))

    def add(self, node: Node) -> int:
        if len(self.nodes) >= syntax.MAX_NODES:
            last = self.tokens[self.place - 1]
            raise self.error(
                f"an expression has at most {syntax.MAX_NODES} numbers, names and operations",
                last.start,
                last.end,
                "Split it with further quantities.",
            )
        self.nodes.append(node)
        towers = [self.towers[c] for c in node.children]
        if node.op == "**":
            towers[1] += 1
        self.towers.append(max(towers, default=0))
        return len(self.nodes) - 1


def _fold(op: str, sense: str, constants: list[float]) -> float:
    numbers = [np.float64(c) for c in constants]
    with np.errstate(all="ignore"):
        if op == "where":
            return float(numbers[2] if OPERATIONS[sense](numbers[0], numbers[1]) else numbers[3])
        if op in {"min", "max"}:
            return float(functools.reduce(OPERATIONS[op], numbers))
        return float(OPERATIONS[op](*numbers))
