"""The one place where numba's compile options stand.

``error_model="numpy"`` lets a division by zero give inf or NaN as numpy does; ``fastmath`` is off,
since holes in the terrain are NaN and must stay so. ``inlined`` is for the steps of a loop over
millions of cells: they become part of their caller, and a product and a sum may be rounded once
instead of twice.
"""

from collections.abc import Callable
from typing import Any

import numpy as np
from numba import njit
from numba import vectorize as numba_vectorize

scalar = njit(cache=True, error_model="numpy", nogil=True)
parallel = njit(cache=True, error_model="numpy", nogil=True, parallel=True)
inlined = njit(cache=True, error_model="numpy", nogil=True, forceinline=True, fastmath={"contract"})


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
