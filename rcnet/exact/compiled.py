"""Functions compiled to machine code, their cache on disk, and blocks of work spread over threads.

Importing this module loads numba; only kernels import it, and they are imported when work is large.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import Any, TypeVar

import numba

_Function = TypeVar("_Function", bound=Callable[..., Any])

# `contract` allows a product and a sum to round once instead of twice, which costs no digit. Nothing else of
# what compilers call fast arithmetic is allowed: it would reorder sums or ignore infinities. Division by zero
# gives inf or nan as in numpy; the solver looks at the result.
_OPTIONS: dict[str, Any] = {
    "nogil": True,
    "fastmath": {"contract"},
    "error_model": "numpy",
    "boundscheck": False,
}


def compiled(function: _Function) -> _Function:
    """The function compiled at first use; on disk for the next process wherever there is a place to write."""
    try:
        return numba.njit(cache=True, **_OPTIONS)(function)  # type: ignore[no-any-return]
    except RuntimeError:  # no directory for the cache can be written
        return numba.njit(**_OPTIONS)(function)  # type: ignore[no-any-return]


def run_blocks(work: Callable[[int], None], blocks: Sequence[int]) -> None:
    """Call `work` for each block, on as many threads as numba may use (NUMBA_NUM_THREADS)."""
    threads = min(int(numba.config.NUMBA_NUM_THREADS), len(blocks))  # type: ignore[attr-defined]
    if threads <= 1:
        for block in blocks:
            work(block)
        return
    with ThreadPoolExecutor(threads) as pool:
        for done in [pool.submit(work, block) for block in blocks]:
            done.result()
