"""The pieces, each a TOML file beside this one, with its title, needs and use in the comments at its head."""

from __future__ import annotations

from dataclasses import dataclass
from importlib.resources import files

from calibrate.errors import InputError, Problem, did_you_mean

ORDER = (
    "permanent",
    "permanent_favourable",
    "imposed_sustained",
    "imposed_intermittent",
    "ground_snow",
    "wind",
    "thermal",
)


@dataclass(frozen=True, slots=True)
class Snippet:
    """A piece of a study file.

    Attributes
    ----------
    name, title : str
    needs : str
        Names that the study must define, with values as an example.
    use : str
        How the limit state uses the variables.
    text : str
        The whole file.
    """

    name: str
    title: str
    needs: str
    use: str
    text: str


def snippets() -> tuple[Snippet, ...]:
    """Return all pieces, from permanent to climatic actions."""
    return tuple(_read(name) for name in ORDER)


def snippet(name: str) -> Snippet:
    """Return one piece.

    Raises
    ------
    InputError
        There is none of this name.
    """
    if name not in ORDER:
        raise InputError(
            Problem(
                f"There is no snippet '{name}'; there are {', '.join(ORDER)}.",
                suggestion=did_you_mean(name, ORDER),
            )
        )
    return _read(name)


def _read(name: str) -> Snippet:
    text = files("calibrate.study.snippets").joinpath(f"{name}.toml").read_text(encoding="utf-8")
    lines = text.splitlines()
    return Snippet(
        name, lines[0].removeprefix("# "), _entry(lines, "needs"), _entry(lines, "limit state"), text
    )


def _entry(lines: list[str], key: str) -> str:
    start = f"# {key}: "
    return next(line.removeprefix(start) for line in lines if line.startswith(start))
