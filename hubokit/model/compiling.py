"""Compiling inner loops, with a cache on disk where there is a place for one."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any


def compiled(function: Callable[..., Any], **options: Any) -> Callable[..., Any]:
    """The function compiled by numba at its first call.

    The compiled code is kept beside the file of the function, or in the user's cache folder. Where neither can be
    written (a read-only container, an account without a home), it is compiled anew in each process.

    Parameters
    ----------
    function : callable
        A loop over arrays.
    options
        Further options of ``numba.njit``.

    Returns
    -------
    callable

    Examples
    --------
    >>> def doubled(number):
    ...     return 2 * number
    >>> compiled(doubled, nogil=True)(21)
    42
    """
    import numba

    try:
        twin: Callable[..., Any] = numba.njit(cache=True, **options)(function)
    except RuntimeError:
        twin = numba.njit(**options)(function)
    return twin
