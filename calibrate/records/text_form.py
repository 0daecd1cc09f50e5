"""How a text file is written: encoding and separator, found or as stated."""

from __future__ import annotations

import codecs
import re
from dataclasses import dataclass

from calibrate.errors import InputError, Problem

SEPARATORS = {",": "commas", ";": "semicolons", "\t": "tabulators"}
ENCODINGS = {"UTF-8": "utf-8", "UTF-16": "utf-16", "Windows-1252": "cp1252"}

_SAVE_AS = "Save the file as 'CSV UTF-8'."
_UTF8_PAIR = re.compile(rb"[\xc2-\xdf][\x80-\xbf]|[\xe0-\xef][\x80-\xbf]{2}")


@dataclass(frozen=True, slots=True)
class TextForm:
    """What the user states about a CSV file; None is found from the file, or refused if it is in doubt.

    Parameters
    ----------
    separator : str, optional
        Between columns: ``,``, ``;`` or a tabulator.
    decimal : str, optional
        Decimal mark: ``.`` or ``,``.
    encoding : str, optional
        ``UTF-8``, ``UTF-16`` or ``Windows-1252``.

    Raises
    ------
    InputError
        Another separator, mark or encoding.
    """

    separator: str | None = None
    decimal: str | None = None
    encoding: str | None = None

    def __post_init__(self) -> None:
        if self.separator is not None and self.separator not in SEPARATORS:
            raise InputError(
                f"separator '{self.separator}' is not known: ',', ';' and a tabulator ('\\t') are read."
            )
        if self.decimal is not None and self.decimal not in {".", ","}:
            raise InputError(f"decimal '{self.decimal}' is not known: it is '.' or ','.")
        if self.encoding is not None and self.encoding not in ENCODINGS:
            known = ", ".join(ENCODINGS)
            raise InputError(f"encoding '{self.encoding}' is not known: {known} are read.")


def decode(data: bytes, file: str, stated: str | None = None) -> tuple[str, str]:
    """Return the text of a file and the name of its encoding.

    Raises
    ------
    InputError
        Not a text in one of the encodings, or one that mixes two.
    """
    if data.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        found, name = "UTF-16", "UTF-16"
    elif data.startswith(codecs.BOM_UTF8):
        data = data.removeprefix(codecs.BOM_UTF8)
        found, name = "UTF-8", "UTF-8 with byte order mark"
    elif stated is None:
        found = name = "UTF-8" if _is_utf8(data) else "Windows-1252"
    else:
        found = name = stated
    if stated not in {None, found}:
        message = (
            f"The file begins with the byte order mark of {found}, but its encoding is stated as {stated}."
        )
        raise InputError(Problem(message, file, None, f"State encoding = '{found}', or nothing."))
    if stated is None and found == "Windows-1252":
        _refuse_mixture(data, file)
    try:
        text = data.decode(ENCODINGS[found])
    except UnicodeDecodeError as error:
        raise InputError(_undecodable(data, file, error, found, stated)) from error
    if "\0" in text:
        line = text.count("\n", 0, text.index("\0")) + 1
        raise InputError(
            Problem("The file is not a text file: it contains null bytes.", file, line, _SAVE_AS)
        )
    return text, name


def _is_utf8(data: bytes) -> bool:
    try:
        data.decode("utf-8")
    except UnicodeDecodeError:
        return False
    return True


def _refuse_mixture(data: bytes, file: str) -> None:
    """Refuse a file that is not UTF-8 as a whole but in parts: half of its letters would come out wrong."""
    pair = _UTF8_PAIR.search(data)
    if pair is None:
        return
    try:
        data.decode("utf-8")
    except UnicodeDecodeError as error:
        line = data.count(b"\n", 0, error.start) + 1
        other = data.count(b"\n", 0, pair.start()) + 1
        message = (
            f"The encoding is in doubt: byte 0x{data[error.start]:02X} in this line has no meaning in UTF-8, "
            f"but line {other} holds letters in UTF-8."
        )
        suggestion = _SAVE_AS + " Or state encoding = 'Windows-1252'."
        raise InputError(Problem(message, file, line, suggestion)) from error


def _undecodable(
    data: bytes, file: str, error: UnicodeDecodeError, found: str, stated: str | None
) -> Problem:
    if found == "UTF-16":
        return Problem("The file begins as UTF-16 but cannot be read as such.", file, None, _SAVE_AS)
    line = data.count(b"\n", 0, error.start) + 1
    place = found if stated else f"UTF-8, nor in {found}"
    kind = "" if stated else "neither "
    message = (
        f"The file is {kind}in {place}: byte 0x{data[error.start]:02X} in this line has no meaning there."
    )
    if stated:
        message = message.replace("The file is in", "The file is not in")
    return Problem(message, file, line, _SAVE_AS)
