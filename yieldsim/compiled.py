"""How functions are compiled, in one place.

No fast-math flags: with them, code just compiled and code read from the cache gave other last digits, and two runs
other bytes. Loops over plain arithmetic are vectorised all the same.

numba keeps compiled code on disk until the file of the function itself changes; it does not look at the files that
function calls.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeVar, cast

from numba import njit, types
from numba.extending import intrinsic

Function = TypeVar("Function", bound=Callable[..., Any])

_OPTIONS: dict[str, Any] = {"error_model": "numpy", "cache": True, "nogil": True, "no_cfunc_wrapper": True}


def compiled(function: Function) -> Function:
    """Compile a function when it is first called, and keep it on disk for the next process."""
    return cast(Function, njit(**_OPTIONS)(function))


def inner(function: Function) -> Function:
    """Compile a function that only compiled functions call: what Python needs to call it is left out."""
    return cast(Function, njit(**_OPTIONS | {"no_cpython_wrapper": True})(function))


def _fma(_typing: Any, _a: Any, _b: Any, _c: Any) -> tuple[Any, Callable[..., Any]]:
    def generate(_target: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        return builder.fma(*arguments)

    return types.float64(types.float64, types.float64, types.float64), generate


#: Return a b + c of three floats with one rounding, in one instruction where the processor has it. Asked for by name it
#: is the same in each copy of the code; a compiler that fuses as it likes makes copies that differ.
fma = cast(Callable[[float, float, float], float], intrinsic(_fma))
