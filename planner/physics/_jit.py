"""The one place where numba's compile options stand.

``error_model="numpy"`` lets a division by zero give inf or NaN as numpy does; of ``fastmath`` only
"contract" is on, by which a product and a sum may be rounded once instead of twice: all else would
forget NaN, and holes in the terrain are NaN and must stay so.

Where the processor has 512-bit vectors, the compiler by default uses half their width, out of
regard for the first processors that had them and slowed down. Measured here: whole vectors make
the path field a third faster with two threads. Set here, since all code must be compiled alike:
compiled code is kept on disk under the processor's features.
"""

from collections.abc import Callable
from types import FunctionType
from typing import Any

import llvmlite.binding
import numba
import numpy as np
from numba import njit
from numba import vectorize as numba_vectorize


def _whole_vectors() -> None:
    """Let the compiler use 512-bit vectors where there are any; NUMBA_CPU_FEATURES overrules."""
    features = llvmlite.binding.get_host_cpu_features()
    options: Any = numba.config
    if options.CPU_FEATURES is None and features.get("avx512f", False):
        options.CPU_FEATURES = f"{features.flatten()},-prefer-256-bit"


_whole_vectors()
_OPTIONS: dict[str, Any] = {
    "cache": True,
    "error_model": "numpy",
    "nogil": True,
    "fastmath": {"contract"},
}
scalar = njit(**_OPTIONS)
# Becomes part of its caller when that is compiled: short formulas in the loops over millions of
# cells, since a call keeps a loop from becoming vector code.
inlined = njit(**_OPTIONS, forceinline=True)
# Pasted into its callers before anything is compiled: pieces of a kernel whose arguments must be
# constants to the compiler.
pasted = njit(**_OPTIONS, inline="always")
parallel = njit(**_OPTIONS, parallel=True)


_SINGLE: dict[Any, Any] = {}


def in_single_precision(function: Any, written: Any = None) -> Any:
    """The same inlined formula in float32, made from its source: numbers in it become float32.

    numba takes a number in a source for a float64, and float32 times float64 is float64: a formula
    that is written once would never run in float32 lanes. Formulas that it calls are turned alike;
    for one that works on the bits of its argument give a version ``written`` for float32.
    """
    if function not in _SINGLE:
        _SINGLE[function] = _turned(function.py_func) if written is None else written
    return _SINGLE[function]


def _turned(source: Any) -> Any:
    code = source.__code__
    constants = tuple(np.float32(c) if isinstance(c, float) else c for c in code.co_consts)
    names = dict(source.__globals__)
    for name in code.co_names:
        value = names.get(name)
        if isinstance(value, float):
            names[name] = np.float32(value)
        elif hasattr(value, "py_func"):
            names[name] = in_single_precision(value)
    # Compiled code is kept on disk under the function's name.
    name = f"{source.__name__}_in_single_precision"
    turned = FunctionType(code.replace(co_consts=constants, co_name=name), names, name)
    turned.__qualname__ = name
    turned.__module__ = source.__module__
    return inlined(turned)


def over_arrays(scalar_function: Any) -> Callable[..., Any]:
    """The same formula over arrays of any shape, broadcast, in float64."""
    arguments = scalar_function.py_func.__code__.co_argcount
    signature = f"float64({', '.join(['float64'] * arguments)})"
    compiled: Any = None

    def call(*values: Any) -> Any:
        nonlocal compiled
        if compiled is None:  # compiled at the first call, not at import
            compiled = numba_vectorize([signature], cache=True)(scalar_function.py_func)
        with np.errstate(invalid="ignore"):  # a comparison with NaN is answered, not warned about
            return compiled(*values)

    return call
