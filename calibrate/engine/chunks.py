"""Runs one function over chunks of situations, in this thread or in several."""

from __future__ import annotations

from collections.abc import Callable
from concurrent.futures import FIRST_EXCEPTION, Future, ThreadPoolExecutor, wait
from typing import TypeVar

Result = TypeVar("Result")
Progress = Callable[[int, int], None]

# Measured with six variables: smaller chunks pay for the calls, larger ones leave the cache. Threads share
# the interpreter, so they want fewer and longer calls.
ONE_THREAD = 8_000
SEVERAL_THREADS = 16_000
LEAST = 1_000


def chunk_size(n: int, workers: int = 1) -> int:
    """Return a good number of situations per chunk.

    Parameters
    ----------
    n : int
        Number of situations.
    workers : int
        Number of threads; each gets a share where n allows.
    """
    if workers <= 1:
        return ONE_THREAD
    share = -(-n // workers)
    return max(LEAST, min(SEVERAL_THREADS, share))


def _pieces(n: int, chunk: int) -> list[slice]:
    return [slice(at, min(at + chunk, n)) for at in range(0, n, chunk)]


def run_chunks(
    function: Callable[[slice], Result],
    n: int,
    *,
    chunk: int | None = None,
    workers: int = 1,
    progress: Progress | None = None,
) -> list[Result]:
    """Call ``function`` with every chunk of ``range(n)`` and return the results in order.

    Parameters
    ----------
    function : callable
        Pure function of a slice. It is called from several threads when ``workers`` exceeds 1.
    n : int
        Number of situations, at least 0.
    chunk : int, optional
        Situations per call; default by :func:`chunk_size`.
    workers : int
        Number of threads, at least 1.
    progress : callable, optional
        Called in the calling thread with the number of situations done and n, after each chunk.

    Returns
    -------
    list
        One result per chunk, in the order of the situations whatever the order of completion.

    Raises
    ------
    ValueError
        ``n``, ``chunk`` or ``workers`` is out of range.
    Exception
        What ``function`` raises, for the earliest of the chunks that failed; chunks that have not begun are dropped.
    """
    if n < 0 or workers < 1 or (chunk is not None and chunk < 1):
        raise ValueError(f"n = {n}, chunk = {chunk} and workers = {workers} must be at least 0, 1 and 1.")
    pieces = _pieces(n, chunk_size(n, workers) if chunk is None else chunk)
    if workers == 1 or len(pieces) <= 1:
        results = []
        for piece in pieces:
            results.append(function(piece))
            if progress is not None:
                progress(piece.stop, n)
        return results
    return _threaded(function, pieces, n, workers, progress)


def _threaded(
    function: Callable[[slice], Result],
    pieces: list[slice],
    n: int,
    workers: int,
    progress: Progress | None,
) -> list[Result]:
    with ThreadPoolExecutor(max_workers=min(workers, len(pieces)), thread_name_prefix="calibrate") as pool:
        size = {pool.submit(function, piece): piece.stop - piece.start for piece in pieces}
        futures = list(size)
        try:
            _await(futures, size, n, progress)
        except BaseException:
            # Also on an interrupt: what has not begun must not begin.
            pool.shutdown(wait=False, cancel_futures=True)
            raise
        return [future.result() for future in futures]


def _await(
    futures: list[Future[Result]],
    size: dict[Future[Result], int],
    n: int,
    progress: Progress | None,
) -> None:
    """Return when all are done; raise the exception of the earliest chunk that failed."""
    pending = set(futures)
    finished = 0
    while pending:
        done, pending = wait(pending, return_when=FIRST_EXCEPTION if progress is None else "FIRST_COMPLETED")
        for future in futures:
            if future in done and future.exception() is not None:
                future.result()
        finished += sum(size[future] for future in done)
        if progress is not None:
            progress(finished, n)
