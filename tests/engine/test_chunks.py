"""Chunks run in order, in any number of threads, and failures come through."""

import itertools
import threading
import time

import numpy as np
import pytest

from calibrate.engine import chunk_size, run_chunks


def _bounds(piece):
    return piece.start, piece.stop


@pytest.mark.parametrize("workers", [1, 2, 5])
@pytest.mark.parametrize(("n", "chunk"), [(10, 3), (9, 3), (1, 4), (4, 4), (25, 1)])
def test_chunks_cover_everything_once_and_in_order(n, chunk, workers):
    bounds = run_chunks(_bounds, n, chunk=chunk, workers=workers)
    assert bounds[0][0] == 0
    assert bounds[-1][1] == n
    assert all(a[1] == b[0] for a, b in itertools.pairwise(bounds))
    assert all(0 < stop - start <= chunk for start, stop in bounds)


def test_nothing_to_do_gives_no_results():
    assert run_chunks(_bounds, 0) == []


def test_results_are_in_order_although_later_chunks_finish_first():
    def slow_start(piece):
        time.sleep(0.05 if piece.start == 0 else 0.0)
        return piece.start

    assert run_chunks(slow_start, 6, chunk=1, workers=3) == list(range(6))


def test_two_workers_work_at_the_same_time():
    both = threading.Barrier(2, timeout=5.0)

    def meet(piece):
        both.wait()
        return piece.start

    assert run_chunks(meet, 2, chunk=1, workers=2) == [0, 1]


@pytest.mark.parametrize("workers", [1, 3])
def test_progress_ends_at_n_and_never_falls(workers):
    seen = []
    run_chunks(_bounds, 100, chunk=7, workers=workers, progress=lambda done, n: seen.append((done, n)))
    done = [d for d, _ in seen]
    assert done == sorted(done)
    assert seen[-1] == (100, 100)
    assert {n for _, n in seen} == {100}


@pytest.mark.parametrize("workers", [1, 4])
def test_an_exception_comes_through(workers):
    def fails(piece):
        if piece.start >= 2:
            raise ZeroDivisionError(f"chunk {piece.start}")
        return piece.start

    with pytest.raises(ZeroDivisionError, match="chunk"):
        run_chunks(fails, 8, chunk=1, workers=workers)


def test_after_a_failure_waiting_chunks_do_not_begin():
    begun = []

    def fails_first(piece):
        begun.append(piece.start)
        if piece.start == 0:
            raise RuntimeError("first")
        time.sleep(0.02)

    with pytest.raises(RuntimeError, match="first"):
        run_chunks(fails_first, 200, chunk=1, workers=2)
    assert len(begun) < 100


@pytest.mark.parametrize("wrong", [{"n": -1}, {"n": 3, "chunk": 0}, {"n": 3, "workers": 0}])
def test_impossible_numbers_are_refused(wrong):
    with pytest.raises(ValueError, match="must be at least"):
        run_chunks(_bounds, **wrong)


def test_threads_share_a_small_number_of_situations():
    assert chunk_size(10_000, 2) == 5_000
    assert chunk_size(100, 8) >= 100
    assert chunk_size(10**6, 2) <= 50_000
    assert 4_000 <= chunk_size(10**6, 1) <= 16_000


def test_elementwise_functions_give_the_same_bits_alone_and_in_a_batch():
    """The promise that chunking changes no bit rests on this property of numpy and scipy on this machine."""
    from scipy import special

    rng = np.random.default_rng(20261)
    z = 3.0 * rng.standard_normal(4_099)
    positive = np.exp(z / 3.0)
    part = special.ndtr(z)
    functions = [
        (np.exp, z), (np.expm1, z), (np.sin, z), (np.cos, z), (np.tan, z), (np.tanh, z), (np.square, z),
        (np.log, positive), (np.log1p, positive), (np.log10, positive), (np.sqrt, positive),
        (lambda v: v**2.7, positive), (lambda v: v**-0.3, positive), (lambda v: 1.0 / v, z),
        (np.arcsin, part), (np.arccos, part),
        (special.ndtr, z), (special.log_ndtr, z), (special.ndtri, part),
        (lambda v: special.gammaincinv(2.3, v), part), (lambda v: special.betaincinv(2.3, 3.0, v), part),
        (lambda v: special.stdtrit(5.0, v), part),
    ]  # fmt: skip
    order = rng.permutation(z.size)
    for function, argument in functions:
        whole = function(argument)
        assert np.array_equal(function(argument[order]), whole[order])
        for width in (1, 3, 7):
            parts = [function(argument[i : i + width]) for i in range(0, 420, width)]
            assert np.array_equal(np.concatenate(parts), whole[:420])
