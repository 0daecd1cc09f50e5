"""Text such as ``yielding or (slip and rupture)`` becomes a tree of names, or a refusal that names the column.

The language has names, ``and``, ``or`` and round brackets; ``and`` binds more strongly. A system built from these words
alone is coherent: one more failure never makes it safe.
"""

from __future__ import annotations

import keyword
import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TypeAlias

from calibrate.errors import did_you_mean
from calibrate.expressions import syntax
from calibrate.expressions.errors import ExpressionError, refuse
from calibrate.expressions.tokens import Token

MOST_WORDS = 200
"""Names and operators together."""

WHAT = "the failure logic"
_TOKEN = re.compile(r"(?P<space>[ \t\r\n]+)|(?P<name>[A-Za-z][A-Za-z0-9_]*)|(?P<sign>[()])")
_WORDS = "Write names, 'and', 'or' and round brackets."
_SYMBOLS = {
    "&": "Write 'and'.",
    "|": "Write 'or'.",
    "∧": "Write 'and'.",
    "∨": "Write 'or'.",
    "∩": "Write 'and'.",
    "∪": "Write 'or'.",
    "*": "Write 'and'.",
    "+": "Write 'or'.",
    ",": "Write 'or' where one failure suffices, 'and' where all are needed.",
    "[": "Use round brackets.",
    "{": "Use round brackets.",
    "]": "Use round brackets.",
    "}": "Use round brackets.",
    "_": "Names begin with a letter.",
}
_NOT = "A system must not fail because a component holds; write it with 'and' and 'or' only."


@dataclass(frozen=True, slots=True)
class Gate:
    """``and`` or ``or`` of two or more inputs, none of them a gate of the same kind."""

    word: str
    inputs: tuple[LogicTree, ...]


LogicTree: TypeAlias = str | Gate
"""A name, or a gate over trees."""


def read_logic(text: str, known: Sequence[str] | None = None) -> LogicTree:
    """Parse a failure logic.

    Parameters
    ----------
    text : str
    known : sequence of str, optional
        The names that may occur; any name where it is None.

    Raises
    ------
    ExpressionError
        With the column and what was probably meant.
    """
    if len(text) > syntax.MAX_CHARACTERS:
        raise refuse(
            f"{WHAT} has at most {syntax.MAX_CHARACTERS} characters, this one has {len(text)}",
            text,
            syntax.MAX_CHARACTERS,
        )
    words = _words(text)
    counted = [w for w in words if w.kind == "name"]
    if len(counted) > MOST_WORDS:
        raise refuse(f"{WHAT} has at most {MOST_WORDS} names and operators", text, counted[MOST_WORDS].start)
    return _Parser(text, words, known).run()


def _words(text: str) -> list[Token]:
    found: list[Token] = []
    position = 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None:
            raise _bad_character(text, position)
        kind, piece = match.lastgroup or "", match.group()
        if kind == "name" and len(piece) > syntax.MAX_NAME:
            raise refuse(
                f"names have at most {syntax.MAX_NAME} characters, this one has {len(piece)}",
                text,
                position,
                match.end(),
            )
        if kind != "space":
            found.append(Token(kind, piece, position))
        position = match.end()
    found.append(Token("end", "", len(text)))
    return found


def _bad_character(text: str, position: int) -> ExpressionError:
    character = text[position]
    if character in "!~¬":
        return refuse(f"'{character}' is not accepted in {WHAT}", text, position, suggestion=_NOT)
    if not character.isprintable():
        return refuse(f"the character number {ord(character)} cannot be used here", text, position)
    if character.isdecimal():
        return refuse("numbers have no meaning in " + WHAT, text, position, suggestion=_WORDS)
    hint = _SYMBOLS.get(character)
    if hint is None:
        hint = "Names use the letters A to Z, digits and '_'." if character.isalpha() else _WORDS
    end = position + (2 if text[position : position + 2] in {"&&", "||"} else 1)
    return refuse(f"'{text[position:end]}' cannot be used in {WHAT}", text, position, end, hint)


class _Parser:
    """Descent over the two operators; gates of the same kind within each other become one."""

    def __init__(self, text: str, words: list[Token], known: Sequence[str] | None) -> None:
        self.text = text
        self.words = words
        self.known = None if known is None else tuple(known)
        self.place = 0
        self.depth = 0

    @property
    def word(self) -> Token:
        return self.words[self.place]

    def take(self) -> Token:
        word = self.word
        self.place += 1
        return word

    def error(self, message: str, word: Token, hint: str | None = None) -> ExpressionError:
        return refuse(message, self.text, word.start, word.end, hint)

    def run(self) -> LogicTree:
        if self.word.kind == "end":
            raise refuse(f"{WHAT} is empty", self.text, 0, suggestion="Name at least one component.")
        tree = self.gate("or")
        if self.word.kind != "end":
            raise self.unexpected(self.word)
        return tree

    def unexpected(self, word: Token) -> ExpressionError:
        if word.text == ")":
            return self.error("this bracket closes nothing", word)
        if word.kind == "name" and word.text.casefold() in {"and", "or", "not"}:
            return self.reserved(word)
        return self.error(f"'and' or 'or' is missing before '{word.text}'", word)

    def reserved(self, word: Token) -> ExpressionError:
        lower = word.text.casefold()
        if lower == "not":
            return self.error(f"'{word.text}' is not accepted in {WHAT}", word, _NOT)
        if word.text in {"and", "or"}:
            return self.error(f"a name is expected here, not '{word.text}'", word)
        if lower in {"and", "or"}:
            return self.error(f"'{word.text}' is written in small letters", word, f"Write '{lower}'.")
        return self.error(f"'{word.text}' is a reserved word", word, _WORDS)

    def gate(self, kind: str) -> LogicTree:
        inputs = [self.part(kind)]
        while self.word.kind == "name" and self.word.text == kind:
            self.take()
            inputs.append(self.part(kind))
        if len(inputs) == 1:
            return inputs[0]
        flat: list[LogicTree] = []
        for item in inputs:
            flat.extend(item.inputs if isinstance(item, Gate) and item.word == kind else (item,))
        return Gate(kind, tuple(flat))

    def part(self, kind: str) -> LogicTree:
        return self.gate("and") if kind == "or" else self.atom()

    def atom(self) -> LogicTree:
        word = self.take()
        if word.kind == "end":
            raise self.error(f"{WHAT} ends where a name is expected", word)
        if word.text == "(":
            return self.bracket(word)
        if word.text == ")":
            raise self.error("a name is expected here, not ')'", word)
        name = word.text
        if self.known is not None and name in self.known:
            return name
        if name in keyword.kwlist or name.casefold() in {"and", "or", "not"}:
            raise self.reserved(word)
        if self.known is not None:
            raise self.error(f"unknown component '{name}'", word, did_you_mean(name, self.known))
        return name

    def bracket(self, opening: Token) -> LogicTree:
        self.depth += 1
        if self.depth > syntax.MAX_DEPTH:
            raise self.error(f"brackets are nested more than {syntax.MAX_DEPTH} deep", opening)
        tree = self.gate("or")
        if self.word.kind == "end":
            raise self.error("this bracket is never closed", opening)
        if self.word.text != ")":
            raise self.unexpected(self.word)
        self.take()
        self.depth -= 1
        return tree
