"""Tasks in forked processes: same results as here, failures raised, a killed child replaced."""

from __future__ import annotations

import os
import signal
import sys
import threading
from functools import partial

import pytest

from calibrate.engine import run_tasks
from calibrate.engine.processes import processes_here

forks = pytest.mark.skipif(sys.platform != "linux", reason="processes are forked on Linux only")


def _square(i: int) -> int:
    return i * i


@pytest.mark.parametrize("processes", [1, pytest.param(2, marks=forks), pytest.param(3, marks=forks)])
@pytest.mark.parametrize("count", [0, 1, 2, 7])
def test_results_keep_their_order(count: int, processes: int) -> None:
    tasks = [partial(_square, i) for i in range(count)]
    assert run_tasks(tasks, processes=processes) == [i * i for i in range(count)]


@forks
def test_work_is_done_in_several_processes() -> None:
    found = run_tasks([os.getpid] * 6, processes=3)
    assert len(set(found)) == 3
    assert found[0] == os.getpid()


@forks
def test_tasks_need_not_be_picklable() -> None:
    here = {"value": 3}
    assert run_tasks([lambda: here["value"], lambda: here["value"] + 1], processes=2) == [3, 4]


@pytest.mark.parametrize("processes", [1, pytest.param(2, marks=forks)])
@pytest.mark.parametrize("bad", [0, 1, 2, 3])
def test_the_earliest_failure_is_raised(bad: int, processes: int) -> None:
    def task(i: int) -> int:
        if i >= bad:
            raise ArithmeticError(f"task {i}")
        return i

    with pytest.raises(ArithmeticError, match=f"task {bad}"):
        run_tasks([partial(task, i) for i in range(4)], processes=processes)


@forks
def test_a_killed_child_is_replaced() -> None:
    parent = os.getpid()

    def task(i: int) -> int:
        if os.getpid() != parent:
            os.kill(os.getpid(), signal.SIGKILL)
        return i

    assert run_tasks([partial(task, i) for i in range(5)], processes=2) == list(range(5))


def test_nothing_is_forked_while_the_caller_runs_threads() -> None:
    wait = threading.Event()
    threads = [threading.Thread(target=wait.wait) for _ in range(2)]
    for thread in threads:
        thread.start()
    try:
        assert processes_here() == 1
    finally:
        wait.set()
        for thread in threads:
            thread.join()


def test_no_process_at_all_is_refused() -> None:
    with pytest.raises(ValueError, match="at least 1"):
        run_tasks([], processes=0)
