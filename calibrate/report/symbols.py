"""Names and formulas of a study as a reader expects them in print: ``gamma_M`` as γ with the index M."""

from __future__ import annotations

import re
from collections.abc import Collection
from html import escape

from calibrate.expressions import Comparison, Expression
from calibrate.expressions.plain import name_plain
from calibrate.expressions.symbols import symbol


class Html(str):
    """Text that is HTML already; templates do not escape it again."""

    __slots__ = ()

    def __html__(self) -> str:
        return str(self)


def escaped(text: str) -> Html:
    """Return plain text as HTML."""
    return Html(escape(text))


def html(name: str) -> Html:
    """Return a name typeset in HTML: a slanted letter, an upright index; escaped."""
    shown = symbol(name)
    base = f"<i>{escape(shown.base)}</i>" if len(shown.base) == 1 else escape(shown.base)
    index = ",".join(shown.subscripts)
    return Html(f'<span class="nm">{base}{f"<sub>{escape(index)}</sub>" if index else ""}</span>')


def plain(name: str) -> str:
    """Return a name for figures and running text: ``γ_M``."""
    return name_plain(name)


# An index that marks a name in a formula until it has its class; no study spells it.
_TOKEN = "calibratefactor"  # noqa: S105 - not a secret
_MARKED = re.compile(
    r"<(mi|mn)([^>]*)>([^<]*)</\1>"
    r"<mrow>((?:(?!</?mrow).)*?)(?:<mo separator=\"true\">,</mo>)?<mi>" + _TOKEN + r"</mi></mrow>"
)


def formula(comparison: Comparison | Expression, factors: Collection[str] = ()) -> Html:
    """Return a formula as MathML on its own line; the names of ``factors`` get the class ``factor``."""
    label = (lambda name: f"{name}_{_TOKEN}" if name in factors else name) if factors else None
    text = comparison.mathml(label, block=isinstance(comparison, Comparison))
    return Html(_MARKED.sub(r'<\1\2 class="factor">\3</\1><mrow class="factor">\4</mrow>', text))
