"""Linear algebra on one thread: the same bits everywhere, no threads that wait on each other."""

from __future__ import annotations

from contextlib import AbstractContextManager
from functools import cache
from typing import Any

from threadpoolctl import ThreadpoolController  # type: ignore[import-untyped]


def one_blas_thread() -> AbstractContextManager[Any]:
    """Hold numpy's and scipy's linear algebra to one thread while the context lasts."""
    limited: AbstractContextManager[Any] = _controller().limit(limits=1)
    return limited


@cache
def _controller() -> Any:
    """Find the libraries once: looking for them takes longer than a small solve."""
    import scipy.linalg  # noqa: F401

    return ThreadpoolController()
