"""How kernels are compiled: once, for read-only C-contiguous arrays, and kept on disk.

The signatures are spelt out so that a writeable and a read-only array meet the same machine code. Fast-math stays off
and nothing is summed in parallel, so results do not depend on the processor. Division follows IEEE 754 (no exception
is raised inside a loop), which is what lets the compiler use vector instructions.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar

from numba import njit, types

__all__ = [
    "CUBE",
    "CUBE_WORK",
    "FLAGS",
    "INDEX",
    "INTEGERS",
    "MASK",
    "PLACES",
    "PLACES_WORK",
    "PLANE",
    "REAL",
    "SPANS",
    "VECTOR",
    "WORK",
    "WORK_ROW",
    "compiled",
    "types",
]

F = TypeVar("F", bound=Callable[..., Any])

PLANE = types.Array(types.float64, 2, "C", readonly=True)
VECTOR = types.Array(types.float64, 1, "C", readonly=True)
MASK = types.Array(types.boolean, 2, "C", readonly=True)
PLACES = types.Array(types.int64, 1, "C", readonly=True)
FLAGS = types.Array(types.boolean, 1, "C", readonly=True)
PLACES_WORK = types.Array(types.int64, 1, "C")
SPANS = types.Array(types.int64, 2, "C", readonly=True)
CUBE = types.Array(types.float64, 3, "C", readonly=True)
CUBE_WORK = types.Array(types.float64, 3, "C")
INTEGERS = types.Array(types.uint16, 3, "C", readonly=True)
WORK = types.Array(types.float64, 2, "C")
WORK_ROW = types.Array(types.float64, 1, "C")
INDEX = types.int64
REAL = types.float64


def compiled(*signature: Any) -> Callable[[F], F]:  # noqa: ANN401
    """Compile a function for these argument types; without any, for whatever a kernel passes to it."""
    options = {"cache": True, "nogil": True, "error_model": "numpy"}
    return njit(signature, **options) if signature else njit(**options)  # type: ignore[no-any-return]
