"""What is wrong with a value, in plain sentences."""

from __future__ import annotations

import datetime
import re
from collections.abc import Mapping
from typing import Any

from calibrate.errors import did_you_mean

_LONGEST = 60
_PLAIN_NUMBER = re.compile(r"\s*[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?\s*")
_DECIMAL_COMMA = re.compile(r"\s*[+-]?\d+,\d+\s*")
_WITH_UNIT = re.compile(r"\s*[+-]?(?:\d+\.?\d*|\.\d+)\s+\S.*")


def describe(value: Any) -> str:
    """Return what was found, in words: ``the text '3.8'``, ``true``, ``an array``, ``2.5``."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        if not value.strip():
            return "an empty text"
        line = value.replace("\n", "\\n")
        shown = line if len(line) <= _LONGEST else line[: _LONGEST - 1] + "…"
        return f"the text '{shown}'"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list):
        return "an array" if value else "an empty array"
    if isinstance(value, (datetime.date, datetime.time)):
        return f"the date or time {value}"
    shown = str(value)
    return shown if len(shown) <= _LONGEST else f"a number of {len(shown)} digits"


def sentence(kind: str, found: Any, details: Mapping[str, Any]) -> tuple[str, str | None]:
    """Return what a value must be, with what was found, and what to do.

    Parameters
    ----------
    kind : str
        The schema's name for the fault.
    found : object
        The offending value.
    details : mapping
        Limits and allowed values, as the schema gives them.

    Returns
    -------
    (str, str or None)
        A message that continues the name of the key ("must be ..."), and a
        suggestion.
    """
    if kind == "literal_error":
        allowed = re.findall(r"'([^']*)'", details["expected"])
        names = ", ".join(f"'{a}'" for a in allowed)
        hint = did_you_mean(found, allowed) if isinstance(found, str) else None
        return f"must be one of {names}; got {describe(found)}.", None if hint and "Known" in hint else hint
    requirement = _REQUIREMENTS[kind].format(**{k: _limit(v) for k, v in details.items()})
    hint = None
    if kind in {"float_type", "int_type"} and isinstance(found, str):
        hint = _number_in_text(found)
    elif kind == "int_type" and isinstance(found, float) and found.is_integer():
        hint = f"Write {found:.0f}."
    elif kind == "bool_type" and isinstance(found, str) and found.casefold() in {"true", "false"}:
        hint = "Remove the quotation marks."
    elif kind == "string_type" and not isinstance(found, (dict, list)):
        hint = "Put it in quotation marks."
    return f"must be {requirement}; got {describe(found)}.", hint


_REQUIREMENTS = {
    "float_type": "a number",
    "bool_type": "true or false",
    "int_type": "a whole number",
    "string_type": "a text",
    "finite_number": "a finite number",
    "greater_than": "greater than {gt}",
    "less_than": "less than {lt}",
    "less_than_equal": "at most {le}",
    "model_type": "a table with keys",
    "greater_than_equal": "at least {ge}",
    "dict_type": "a table of named entries",
    "list_type": "an array",
    "calibrate_empty": "filled in",
    "calibrate_one_line": "one line of text",
    "calibrate_value": 'a number, a text such as "500 MPa", or an expression in quotation marks',
    "calibrate_names": "a name or an array of names",
    "calibrate_exponent": 'a number, or "fit"',
    "calibrate_entry": "a text, a number, or true or false",
    "calibrate_families": 'the name of a family, an array of such names, or "best"',
}


def _limit(value: Any) -> str:
    return f"{value:g}" if isinstance(value, (int, float)) else str(value)


def _number_in_text(found: str) -> str | None:
    if _PLAIN_NUMBER.fullmatch(found):
        return "Remove the quotation marks."
    if _DECIMAL_COMMA.fullmatch(found):
        return "Remove the quotation marks and write a decimal point."
    if _WITH_UNIT.fullmatch(found):
        return "It takes no unit and no quotation marks."
    return None
