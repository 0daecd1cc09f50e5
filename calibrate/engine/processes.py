"""Runs independent tasks side by side in forked processes, where the system allows it."""

from __future__ import annotations

import os
import sys
import threading
import warnings
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, TypeAlias, TypeVar

if TYPE_CHECKING:
    from multiprocessing.connection import Connection
    from multiprocessing.process import BaseProcess

Result = TypeVar("Result")
Played: TypeAlias = tuple[dict[int, Result], dict[int, Exception]]
"""Results and failures by the index of their task."""

MOST = 4
_OWN_THREADS = 2
"""The main thread, and the one that redraws a progress bar: neither holds a lock that a child would need."""


def processes_here() -> int:
    """Return how many processes :func:`run_tasks` uses by default: one per free processor, at most four.

    One where processes cannot be forked safely: outside Linux, or while the caller runs threads of its own.
    """
    if sys.platform != "linux" or threading.active_count() > _OWN_THREADS:
        return 1
    return max(1, min(MOST, len(os.sched_getaffinity(0))))


def run_tasks(tasks: Sequence[Callable[[], Result]], *, processes: int | None = None) -> list[Result]:
    """Call every task and return the results in order.

    Parameters
    ----------
    tasks : sequence of callable
        Independent of each other and of order; their results can be pickled. They need not be picklable.
    processes : int, optional
        This process included; default by :func:`processes_here`. With 1, nothing is forked.

    Returns
    -------
    list
        The same whatever the number of processes.

    Raises
    ------
    ValueError
        ``processes`` is below 1.
    Exception
        What a task raises, for the earliest task that failed.
    """
    count = processes_here() if processes is None else processes
    if count < 1:
        raise ValueError(f"processes = {count} must be at least 1.")
    hands = _dealt(len(tasks), min(count, len(tasks)))
    children = [_start(tasks, hand) for hand in hands[1:]]
    results: dict[int, Result] = {}
    failures: dict[int, Exception] = {}
    try:
        played = [_play(tasks, hands[0])] if hands else []
        for (_, receiver), hand in zip(children, hands[1:], strict=True):
            played.append(_received(receiver) or _play(tasks, hand))
    finally:
        for process, receiver in children:
            receiver.close()
            process.terminate()
            process.join()
    for done, failed in played:
        results |= done
        failures |= failed
    if failures:
        raise failures[min(failures)]
    return [results[index] for index in range(len(tasks))]


def _dealt(tasks: int, hands: int) -> list[list[int]]:
    """Deal tasks there and back (0 1 1 0 0 1 ...), which evens out costs that rise or fall along the list."""
    dealt: list[list[int]] = [[] for _ in range(hands)]
    for index in range(tasks):
        turn, place = divmod(index, hands)
        dealt[place if turn % 2 == 0 else hands - 1 - place].append(index)
    return dealt


def _play(tasks: Sequence[Callable[[], Result]], hand: list[int]) -> Played[Result]:
    """Call the tasks of one hand; a failure ends it, later tasks being of no use."""
    done: dict[int, Result] = {}
    for index in hand:
        try:
            done[index] = tasks[index]()
        except Exception as error:
            return done, {index: error}
    return done, {}


def _start(tasks: Sequence[Callable[[], Result]], hand: list[int]) -> tuple[BaseProcess, Connection]:
    import multiprocessing

    context = multiprocessing.get_context("fork")
    receiver, sender = context.Pipe(duplex=False)
    process = context.Process(target=_child, args=(tasks, hand, sender), daemon=True)
    with warnings.catch_warnings():
        # Python warns of the threads that numpy's libraries keep; they restore themselves after a fork.
        warnings.simplefilter("ignore", DeprecationWarning)
        process.start()
    sender.close()
    return process, receiver


def _child(tasks: Sequence[Callable[[], Result]], hand: list[int], sender: Connection) -> None:
    try:
        sender.send(_play(tasks, hand))
    except KeyboardInterrupt:
        os._exit(130)  # the parent says it


def _received(receiver: Connection) -> Played[Result] | None:
    """Return what a child sends; None if it died before, so that its tasks are done here."""
    try:
        played: Played[Result] = receiver.recv()
    except (EOFError, OSError):
        return None
    return played
