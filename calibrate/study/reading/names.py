"""One name space for a study: who is called what, and who may use whom."""

from __future__ import annotations

import keyword
import re
from collections.abc import Collection, Iterable, Mapping
from dataclasses import dataclass, field

from calibrate.errors import did_you_mean, nearest
from calibrate.expressions import RESERVED_NAMES
from calibrate.study.reading.context import Reading
from calibrate.study.reading.toml_lines import Place
from calibrate.units import Dimension

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,39}")
_OF_RESULTS = frozenset({"rule", "situation", "weight", "status", "pf"})
_OF_RESULTS_BEGIN = ("beta_", "size_", "alpha_", "x_")
_MOST_LISTED = 12

_KINDS = {
    "quantity": ("a quantity", "quantities"),
    "derived": ("a derived quantity", "derived quantities"),
    "axis": ("an axis", "axes"),
    "column": ("a table column", "table columns"),
    "label": ("a table column of text", "table columns of text"),
    "variable": ("a basic variable", "basic variables"),
    "factor": ("a factor", "factors"),
    "size": ("the size of a rule", "sizes of rules"),
    "site column": ("a column of a site table", "columns of a site table"),
    "site label": ("a column of text of a site table", "columns of text of a site table"),
}
_SITUATION = frozenset({"quantity", "derived", "axis", "column"})


@dataclass(frozen=True, slots=True)
class Use:
    """A place where expressions stand, and the kinds of names that they may use there."""

    who: str
    kinds: frozenset[str]
    advice: Mapping[str, str] = field(default_factory=dict)


_ONLY_IN_LIMIT_STATES = "Basic variables belong in limit states; use a characteristic value."
_FACTORS_WHERE = "Factors belong in design checks and limit states."
_LABELS = "Text columns are labels; expressions take numbers."
_SIZES_WHERE = "A size is known only in its own rule and in the basic variables of that rule."

QUANTITIES = Use(
    "quantities",
    frozenset({"quantity"}),
    {
        **dict.fromkeys(
            ("axis", "column", "derived"), "What differs between situations belongs in [situations.derived]."
        ),
        "variable": _ONLY_IN_LIMIT_STATES,
        "factor": _FACTORS_WHERE,
        "size": _SIZES_WHERE,
    },
)
DERIVED = Use(
    "derived quantities",
    _SITUATION,
    {"variable": _ONLY_IN_LIMIT_STATES, "factor": _FACTORS_WHERE, "size": _SIZES_WHERE, "label": _LABELS},
)
WEIGHTS = Use(
    "weights",
    _SITUATION,
    {"variable": _ONLY_IN_LIMIT_STATES, "factor": _FACTORS_WHERE, "size": _SIZES_WHERE, "label": _LABELS},
)
MODELS = Use(
    "moments and parameters of basic variables",
    _SITUATION | {"size"},
    {
        "variable": "Basic variables are combined in limit states; use a characteristic value.",
        "factor": _FACTORS_WHERE,
        "size": _SIZES_WHERE,
        "label": _LABELS,
    },
)
GIVEN_MODELS = Use(
    "moments and parameters of basic variables",
    _SITUATION | {"size", "variable"},
    {"factor": _FACTORS_WHERE, "size": _SIZES_WHERE, "label": _LABELS},
)
_SITES_ALONE = (
    "The classes of sites are the same in every design situation; write the scale of the situation into the limit "
    "state."
)
OVER_SITES = Use(
    "moments and parameters of a variable over sites",
    frozenset({"quantity", "site column"}),
    {
        **dict.fromkeys(("axis", "column", "derived", "size"), _SITES_ALONE),
        "variable": "Basic variables are combined in limit states.",
        "factor": _FACTORS_WHERE,
        "label": _LABELS,
        "site label": _LABELS,
    },
)
CHECKS = Use(
    "design checks",
    _SITUATION | {"factor", "size"},
    {
        "variable": "Use a characteristic value, for example a quantity.",
        "size": "A size is known only in its own rule.",
        "label": _LABELS,
    },
)
LIMIT_STATES = Use(
    "limit states",
    _SITUATION | {"factor", "size", "variable"},
    {"size": "A size is known only in its own rule.", "label": _LABELS},
)


@dataclass(slots=True)
class Name:
    """A name with what it stands for.

    ``dimension`` is None where the definition is faulty; ``note`` is said when
    an expression uses the name where it may not.
    """

    name: str
    kind: str
    place: Place
    dimension: Dimension | None = None
    note: str = ""


@dataclass(slots=True)
class NameSpace:
    """All names of a study.

    ``sizes`` are kept by rule, because they are local to it.  ``used`` collects
    every name that some expression uses, ``refused`` names that were reported
    and about which nothing more should be said.  ``incomplete``
    says that some names could not be read (a table that is missing, say), so
    that an unknown name proves nothing.  ``elsewhere`` are names that count in
    some other place only, with that place.
    """

    reading: Reading
    names: dict[str, Name] = field(default_factory=dict)
    sizes: dict[str, Name] = field(default_factory=dict)
    used: set[str] = field(default_factory=set)
    refused: set[str] = field(default_factory=set)
    incomplete: bool = False
    elsewhere: dict[str, str] = field(default_factory=dict)

    def declare(self, name: str, kind: str, place: Place) -> bool:
        """Enter a name; report it if it is no name or taken, and return whether it was entered."""
        if not check_name(self.reading, name, kind, place):
            self.refused.add(name)
            return False
        other = self.names.get(name)
        if other is not None:
            self._duplicate(other, Name(name, kind, place))
            return False
        self.names[name] = Name(name, kind, place)
        return True

    def declare_size(self, rule: str, name: str, place: Place) -> bool:
        """Enter the size of a rule; it may repeat in other rules but not be anything else."""
        if not check_name(self.reading, name, "size", place):
            self.refused.add(name)
            return False
        size = Name(name, "size", place)
        if (other := self.names.get(name)) is not None:
            self._duplicate(other, size)
            return False
        self.sizes[rule] = size
        return True

    def _duplicate(self, first: Name, second: Name) -> None:
        self.refused.add(first.name)
        line = self.reading.line
        (one, a), (two, b) = sorted(((line(n.place) or 0, n) for n in (first, second)), key=lambda p: p[0])
        self.reading.raw_problem(
            f"the name '{first.name}' stands for two things: {_KINDS[a.kind][0]} (line {one}) and "
            f"{_KINDS[b.kind][0]} (line {two}).",
            b.place,
            "Quantities, variables, axes, columns, derived quantities, factors and sizes share their names.",
        )

    def kind(self, name: str) -> str | None:
        """Return what a name stands for outside the rules; None if it is not known."""
        found = self.names.get(name)
        return None if found is None else found.kind

    def set_dimension(self, name: str, dimension: Dimension) -> None:
        """Note the dimension of a name whose definition is sound."""
        self.names[name].dimension = dimension

    def of_kind(self, *kinds: str) -> list[str]:
        """Return the names of some kinds, in the order of declaration."""
        return [n.name for n in self.names.values() if n.kind in kinds]

    def check_use(
        self, used: Collection[str], place: Place, use: Use, rule: str | None = None
    ) -> dict[str, Dimension] | None:
        """Check that an expression uses only names that it may use.

        Parameters
        ----------
        used : collection of str
            Names in the expression.
        place : tuple
            Where the expression stands.
        use : Use
            What may stand there.
        rule : str, optional
            The rule whose size may be used.

        Returns
        -------
        dict or None
            The dimension of each name; None if a name is unknown, not allowed
            here, or itself faulty, so that dimensions cannot be checked.
        """
        size = self.sizes.get(rule) if rule is not None else None
        dimensions: dict[str, Dimension] = {}
        sound = True
        self.used.update(used)
        for name in sorted(used):
            found = size if size is not None and size.name == name else self.names.get(name)
            if name in self.refused:
                sound = False
            elif found is None or found.kind not in use.kinds:
                self._refuse(name, found, place, use, rule)
                sound = False
            elif found.dimension is None:
                sound = False
            else:
                dimensions[name] = found.dimension
        return dimensions if sound else None

    def _refuse(self, name: str, found: Name | None, place: Place, use: Use, rule: str | None) -> None:
        kind = None if found is None else found.kind
        if kind is None and any(s.name == name for s in self.sizes.values()):
            if use in (MODELS, GIVEN_MODELS) and rule is None:
                return  # which rules use the variable, and whether they have this size, is checked with them
            kind = "size"
        if kind is not None:
            one, all_of_them = _KINDS[kind]
            owners = [f"rules.{r}" for r, s in self.sizes.items() if s.name == name]
            of = f" ({', '.join(owners)})" if owners and kind == "size" else ""
            self.reading.raw_problem(
                f"{self.reading.dotted(place)}: {use.who} may not use {all_of_them}; '{name}' is {one}{of}.",
                place,
                " ".join(filter(None, (use.advice.get(kind), found.note if found else ""))) or None,
            )
        elif name in self.elsewhere:
            self.reading.raw_problem(
                f"{self.reading.dotted(place)}: '{name}' is a column of {self.elsewhere[name]}, which only a variable "
                f"over these sites may use.",
                place,
            )
        elif not self.incomplete:
            known = self.of_kind(*use.kinds)
            if rule in self.sizes and "size" in use.kinds:
                known.append(self.sizes[rule].name)
            self.reading.raw_problem(
                f"{self.reading.dotted(place)}: the name '{name}' is not defined.",
                place,
                _suggest(name, known),
            )


def _suggest(name: str, known: list[str]) -> str | None:
    if nearest(name, known) is None and len(known) > _MOST_LISTED:
        return None
    return did_you_mean(name, known)


def check_name(reading: Reading, name: str, kind: str, place: Place) -> bool:
    """Report a name that does not have the form of one, or that means something already.

    ``kind`` is one of those above, or ``rule`` or ``records``, whose names are
    not used in expressions but appear in results.
    """
    message, suggestion = None, None
    if not _NAME.fullmatch(name):
        message = "is not a name: a letter A to Z, then up to 39 letters, digits or '_'"
        suggestion = _spelt(name)
    elif keyword.iskeyword(name):
        message = "cannot be used as a name: it is a reserved word"
    elif name in RESERVED_NAMES:
        message = "cannot be used as a name: it is " + (
            "a constant" if name == "pi" else "a function of expressions"
        )
    elif kind in {"axis", "column", "label"} and (name in _OF_RESULTS or name.startswith(_OF_RESULTS_BEGIN)):
        taken = (
            name if name in _OF_RESULTS else next(b for b in _OF_RESULTS_BEGIN if name.startswith(b)) + "..."
        )
        message = f"cannot name an axis or a table column: '{taken}' is a column of the results"
    if message is None:
        return True
    shown = name if len(name) <= 60 else name[:59] + "…"
    reading.raw_problem(f"'{shown}' {message}.", place, suggestion)
    return False


def _spelt(name: str) -> str | None:
    """Suggest the nearest thing that is a name."""
    plain = re.sub(r"[^A-Za-z0-9_]+", "_", name).strip("_")[:40]
    return f"Perhaps '{plain}'?" if _NAME.fullmatch(plain) else None


def declare_all(space: NameSpace, kind: str, names: Iterable[str], section: Place) -> None:
    """Enter the names of one section."""
    for name in names:
        space.declare(name, kind, (*section, name))
