"""The one way numeric kernels are compiled.

Compiled code is kept on disk where that is possible; on a read-only installation without a home
directory the same kernel is compiled afresh in each process instead of failing at import.

A kernel and everything it calls belong into one file: the stored code is renewed when its own file
changes, not when a callee in another file does.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, overload

from numba import njit

F = TypeVar("F", bound=Callable[..., Any])


@overload
def kernel(function: F) -> F: ...
@overload
def kernel(function: None = None, **options: Any) -> Callable[[F], F]: ...


def kernel(function: F | None = None, **options: Any) -> F | Callable[[F], F]:
    """Compile a function to machine code on first use; `options` go to numba unchanged."""

    def compiled(target: F) -> F:
        settings = {"cache": True, **options}
        try:
            return njit(**settings)(target)
        except (RuntimeError, OSError):
            # No writable place for the stored code.
            settings["cache"] = False
            return njit(**settings)(target)

    if function is not None:
        return compiled(function)
    return compiled
