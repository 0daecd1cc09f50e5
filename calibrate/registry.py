"""Registries: every interchangeable thing is found by its name, in the order in which it was declared."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from types import MappingProxyType
from typing import TypeVar

Item = TypeVar("Item")


def registered(items: Iterable[Item], by: str = "name") -> Mapping[str, Item]:
    """Return the items by name, read-only; a name that comes twice is a mistake of ours.

    Parameters
    ----------
    items : iterable
    by : str
        Attribute that holds the name.
    """
    by_name: dict[str, Item] = {}
    for item in items:
        name = str(getattr(item, by))
        if name in by_name:
            raise ValueError(f"the name '{name}' is registered twice")
        by_name[name] = item
    return MappingProxyType(by_name)
