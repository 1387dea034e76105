"""Linear algebra on one thread.

The matrices here are small: threads make them slower, and the sums of a threaded product depend on their number,
while results must not.
"""

from __future__ import annotations

import functools
from collections.abc import Callable
from typing import Any, ParamSpec, TypeVar

P = ParamSpec("P")
T = TypeVar("T")


@functools.cache
def _pools() -> Any:
    """The thread pools of the linear algebra; looking for them takes longer than a small body."""
    import scipy.linalg  # noqa: F401  its own linear algebra must be loaded before it can be found
    from threadpoolctl import ThreadpoolController

    return ThreadpoolController()


def on_one_thread(function: Callable[P, T]) -> Callable[P, T]:
    """The function, with its linear algebra on one thread."""

    @functools.wraps(function)
    def wrapped(*args: P.args, **kwargs: P.kwargs) -> T:
        with _pools().limit(limits=1, user_api="blas"):
            return function(*args, **kwargs)

    return wrapped
