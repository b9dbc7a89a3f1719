"""One thread for every product of matrices.

Its last bits depend on how many threads take part, and so would the digests of nodes on the machine. Two cores are kept
busy by two jobs; helper threads would only spin beside them.
"""

from __future__ import annotations

import os

ONE_THREAD = dict.fromkeys(
    ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS"), "1"
)


def hold_to_one_thread() -> None:
    """Hold the libraries of linear algebra to one thread: those to be loaded by variables, those loaded by call."""
    from threadpoolctl import threadpool_limits

    os.environ.update(ONE_THREAD)
    threadpool_limits(limits=1, user_api="blas")
