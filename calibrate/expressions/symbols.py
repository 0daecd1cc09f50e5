"""How a name is typeset: Greek letters by their names, subscripts after the underscore."""

from __future__ import annotations

import re
from dataclasses import dataclass

GREEK = dict(
    zip(
        [
            *(
                "alpha",
                "beta",
                "gamma",
                "delta",
                "epsilon",
                "zeta",
                "eta",
                "theta",
                "iota",
                "kappa",
                "lambda",
            ),
            *(
                "mu",
                "nu",
                "xi",
                "omicron",
                "pi",
                "rho",
                "sigma",
                "tau",
                "upsilon",
                "phi",
                "chi",
                "psi",
                "omega",
            ),
        ],
        "αβγδεζηθικλμνξοπρστυφχψω",
        strict=True,
    )
)
GREEK |= {name.capitalize(): letter.upper() for name, letter in GREEK.items()}
# Variant letters; "lamda" because Python reserves "lambda".
GREEK |= {"lamda": "λ", "Lamda": "Λ", "varphi": "ϕ", "varepsilon": "ϵ", "vartheta": "ϑ", "varrho": "ϱ"}


@dataclass(frozen=True, slots=True)
class Symbol:
    """A base, and subscripts that are set with commas between them."""

    base: str
    subscripts: tuple[str, ...]


def symbol(name: str) -> Symbol:
    """Split ``gamma_M0`` into γ and M0; ``k1`` into k and 1; ``f_c_k`` into f and c, k.

    Digits at the end of a one-letter or Greek base become its subscript.
    """
    base, *parts = [p for p in name.split("_") if p] or [name]
    subscripts = [GREEK.get(p, p) for p in parts]
    match = re.fullmatch(r"([A-Za-z]+)([0-9]+)", base)
    if match and (len(match[1]) == 1 or match[1] in GREEK):
        base = match[1]
        subscripts.insert(0, match[2])
    return Symbol(GREEK.get(base, base), tuple(subscripts))
