"""Text becomes words; what is no word of the language is refused with what was probably meant."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from calibrate.expressions import syntax
from calibrate.expressions.errors import ExpressionError, refuse

_TOKEN = re.compile(
    r"(?P<space>[ \t\r\n]+)"
    r"|(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[A-Za-z][A-Za-z0-9_]*)"
    r"|(?P<sign>>=|<=|\*\*|[-+*/(),])"
)
# What a character that is not part of the language was probably meant to be.
_INSTEAD = {
    "^": "Write a power with '**'.",
    "=": "Write '>=' or '<='.",
    "<": "Write '<='.",
    ">": "Write '>='.",
    "!": "Write '>=' or '<='.",
    "≥": "Write '>='.",
    "≤": "Write '<='.",
    "×": "Write '*'.",
    "·": "Write '*'.",
    "⋅": "Write '*'.",
    "÷": "Write '/'.",
    "−": "Write '-'.",
    "–": "Write '-'.",
    "²": "Write '**2'.",
    "³": "Write '**3'.",
    "√": "Write 'sqrt(...)'.",
    "π": "Write 'pi'.",
    ".": "A decimal point belongs between digits; nothing is looked up with a point.",
    "_": "Names begin with a letter.",
    "[": "Use round brackets.",
    "{": "Use round brackets.",
    "%": "Units, '%' among them, belong to quantities, not into expressions.",
    "°": "Units belong to quantities, not into expressions.",
    ":": "Nothing is assigned inside an expression.",
    "&": "Compare one pair with '>=' or '<='; combine with min(...) or max(...).",
    "|": "Write 'abs(...)' for a size; combine comparisons with min(...) or max(...).",
}


@dataclass(frozen=True, slots=True)
class Token:
    """One word: ``kind`` is number, name, sign or end; ``start`` counts from 0."""

    kind: str
    text: str
    start: int

    @property
    def end(self) -> int:
        """Position after the word."""
        return self.start + len(self.text)


def tokens(text: str) -> list[Token]:
    """Split a text into words; the last one is ``end``.

    Raises
    ------
    ExpressionError
        A character or number that does not belong to the language, or a name too long.
    """
    found: list[Token] = []
    position = 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None:
            raise _bad_character(text, position)
        kind, piece = match.lastgroup or "", match.group()
        position = match.end()
        if kind == "number":
            _check_number(text, match.start(), position)
        elif kind == "name" and len(piece) > syntax.MAX_NAME:
            raise refuse(
                f"names have at most {syntax.MAX_NAME} characters, this one has {len(piece)}",
                text,
                match.start(),
                position,
            )
        if kind != "space":
            found.append(Token(kind, piece, match.start()))
    found.append(Token("end", "", len(text)))
    return found


def _bad_character(text: str, position: int) -> ExpressionError:
    character = text[position]
    following = text[position + 1 : position + 2]
    if character in "<>=!" or (character in "≥≤"):
        end = position + (2 if following == "=" else 1)
        return refuse(
            f"'{text[position:end]}' is not accepted, comparisons are '>=' or '<='",
            text,
            position,
            end,
            _INSTEAD.get(character) if following != "=" else None,
        )
    if character in "'\"`":
        return refuse("text in quotes cannot be used here", text, position)
    if not character.isprintable():
        return refuse(f"the character number {ord(character)} cannot be used here", text, position)
    hint = _INSTEAD.get(character)
    if hint is None and character.isalpha():
        hint = "Names use the letters A to Z, digits and '_', for example 'gamma_M'."
    return refuse(f"'{character}' cannot be used here", text, position, suggestion=hint)


def _check_number(text: str, start: int, end: int) -> None:
    digits = text[start:end]
    tail = re.compile(r"[A-Za-z0-9_.]*").match(text, end)
    rest = tail.group() if tail else ""
    if rest:
        if rest[0] == "_":
            hint = "Write digits without '_'."
        elif digits == "0" and rest[0] in "xXoObB":
            hint = "Write numbers in decimal."
        elif rest in {"j", "J"}:
            hint = "Only real numbers are used; a product needs '*'."
        elif rest[0] in "eE" and not rest[1:2].isalpha():
            hint = "An exponent needs digits, as in '2.1e5'."
        elif rest[0] == ".":
            hint = "A number has one decimal point."
        else:
            hint = f"If a product was meant, write '{digits}*{rest}'."
        raise refuse(f"'{digits}{rest}' is not a decimal number", text, start, end + len(rest), hint)
    if not math.isfinite(float(digits)):
        raise refuse(f"the number {digits} is too large", text, start, end)
