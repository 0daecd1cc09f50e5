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


_TIED = re.compile(r" (?:[=±] |%(?!\w))")


def escaped(text: str) -> Html:
    """Return plain text as HTML."""
    return Html(escape(text))


def kept(text: str) -> str:
    """Return a text, plain or HTML, in which no line ends beside ``=`` or ``±`` or before ``%``."""
    shown = _TIED.sub(lambda m: m[0].replace(" ", "\u00a0"), text)
    return Html(shown) if isinstance(text, Html) else shown


def path(text: str, title: str = "") -> Html:
    """Return the name of a file, or a digest, which may be broken after a slash; ``title`` is its long form."""
    long = f' title="{escape(title)}"' if title else ""
    return Html(f'<span class="path"{long}>{escape(text).replace("/", "/<wbr>")}</span>')


def html(name: str) -> Html:
    """Return a name typeset in HTML: a slanted letter, an upright index; escaped."""
    shown = symbol(name)
    base = f"<i>{escape(shown.base)}</i>" if len(shown.base) == 1 else escape(shown.base)
    index = ",".join(shown.subscripts)
    return Html(f'<span class="nm">{base}{f"<sub>{escape(index)}</sub>" if index else ""}</span>')


def plain(name: str) -> str:
    """Return a name for running text: ``γ_M``."""
    return name_plain(name)


_INDEXED = re.compile(r"(?<!\w)([A-Za-zα-ωΑ-Ω])_([A-Za-z0-9α-ωΑ-Ω∞]+(?:,[A-Za-z0-9α-ωΑ-Ω∞]+)*)")


def running(text: str) -> Html:
    """Return running text with its one-letter symbols typeset, such as ``k_d,n``; escaped.

    Examples
    --------
    >>> running("k_n < 2")
    '<i>k</i><sub>n</sub> &lt; 2'
    """
    return Html(kept(Html(_INDEXED.sub(r"<i>\1</i><sub>\2</sub>", escape(text)))))


def drawn(name: str) -> str:
    """Return a name for figures, as a formula of matplotlib: slanted letter, upright index."""
    shown = symbol(name)
    base = shown.base if len(shown.base) == 1 else _upright(shown.base)
    index = f"_{{{_upright(','.join(shown.subscripts))}}}" if shown.subscripts else ""
    return f"${base}{index}$"


def _upright(word: str) -> str:
    return r"\mathrm{" + word.replace("_", r"\_") + "}"


def literal(text: str) -> str:
    """Return text of a user for a figure in which formulas are set: a dollar sign stays one."""
    return text.replace("$", r"\$")


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
