"""In which order definitions that use one another can be evaluated."""

from __future__ import annotations

import heapq
from collections.abc import Collection, Mapping


def dependence_order(uses: Mapping[str, Collection[str]]) -> tuple[list[str], list[list[str]]]:
    """Order names so that each comes after those that it uses.

    Parameters
    ----------
    uses : mapping of str to collection of str
        For each name what its definition uses; names that are no keys are
        ignored.

    Returns
    -------
    order : list of str
        Names that can be evaluated, in the order of ``uses`` where dependence
        allows it.
    cycles : list of list of str
        Each cycle once, as a closed walk ("a", "b", "a") that starts with its
        first name in ``uses``.  Names that only lead into a cycle are in
        neither list.
    """
    place = {name: i for i, name in enumerate(uses)}
    needs = {name: {u for u in used if u in place} for name, used in uses.items()}
    users: dict[str, list[str]] = {name: [] for name in uses}
    for name, used in needs.items():
        for u in used:
            users[u].append(name)
    missing = {name: len(used) for name, used in needs.items()}
    ready = [place[name] for name, count in missing.items() if not count]
    names, order = list(uses), []
    while ready:
        # The topmost first keeps the order of the file.
        name = names[heapq.heappop(ready)]
        order.append(name)
        for user in users[name]:
            missing[user] -= 1
            if not missing[user]:
                heapq.heappush(ready, place[user])
    done = set(order)
    return order, _cycles(
        {n: sorted(used - done, key=place.__getitem__) for n, used in needs.items() if n not in done}
    )


def _cycles(uses: Mapping[str, list[str]]) -> list[list[str]]:
    """Return one cycle through each name that lies on a cycle not yet told."""
    cycles: list[list[str]] = []
    told: set[str] = set()
    for name in uses:
        if name in told:
            continue
        walk = _way_back(name, uses)
        if walk:
            cycles.append(walk)
            told.update(walk)
    return cycles


def _way_back(start: str, uses: Mapping[str, list[str]]) -> list[str]:
    """Return a shortest closed walk from ``start``, or [] if there is none."""
    came_from: dict[str, str] = {}
    front = [start]
    while front:
        following: list[str] = []
        for name in front:
            for used in uses[name]:
                if used == start:
                    walk = [name]
                    while walk[-1] != start:
                        walk.append(came_from[walk[-1]])
                    return [*reversed(walk), start]
                if used not in came_from:
                    came_from[used] = name
                    following.append(used)
        front = following
    return []
