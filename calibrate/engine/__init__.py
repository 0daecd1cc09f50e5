"""Where chunks of work run, and where random numbers come from.

Owns the split of n situations into chunks, the threads that work on them, the processes that share independent
tasks, and random streams that are keyed by purpose. Knows nothing about what is computed.
"""

from calibrate.engine.chunks import chunk_size, run_chunks
from calibrate.engine.processes import run_tasks
from calibrate.engine.streams import stream

__all__ = ["chunk_size", "run_chunks", "run_tasks", "stream"]
