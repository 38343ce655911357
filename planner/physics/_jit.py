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
