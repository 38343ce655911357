"""The one place where numba's compile options stand.

``error_model="numpy"`` lets a division by zero give inf or NaN as numpy does; ``fastmath`` is off,
since holes in the terrain are NaN and must stay so.
"""

from numba import njit

scalar = njit(cache=True, error_model="numpy", nogil=True)
parallel = njit(cache=True, error_model="numpy", nogil=True, parallel=True)
