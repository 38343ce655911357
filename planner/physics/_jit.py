"""The one place where numba's compile options stand.

``error_model="numpy"`` lets a division by zero give inf or NaN as numpy does; ``fastmath`` is off,
since holes in the terrain are NaN and must stay so.
"""

from collections.abc import Callable
from typing import Any

import numpy as np
from numba import njit
from numba import vectorize as numba_vectorize

scalar = njit(cache=True, error_model="numpy", nogil=True)
# Short formulas that stand in the loops of a kernel: a call would keep a loop from vector code.
formula = njit(cache=True, error_model="numpy", nogil=True, forceinline=True)
# Pasted into its callers before anything is compiled: for pieces of a kernel that have one caller,
# and for those whose arguments must be constants to the compiler.
pasted = njit(cache=True, error_model="numpy", nogil=True, inline="always")
parallel = njit(cache=True, error_model="numpy", nogil=True, parallel=True)


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
