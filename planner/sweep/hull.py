"""Upper convex hull of the points passed so far along a radial, and questions asked of it.

The hull is a stack of sample numbers: the walk away from the mast appends a point, dropping those
that sink below the new chord, so each point is pushed and dropped once. The line of sight from a
receiver back to the terrain touches the hull, so its steepest point is found on the stack.
"""

from numpy.typing import NDArray

from planner.physics._jit import scalar


@scalar
def pushed(stack: NDArray, size: int, distance: NDArray, height: NDArray, i: int) -> int:
    """Append sample ``i`` to the hull and return the hull's new size."""
    while size >= 2:
        a = stack[size - 2]
        b = stack[size - 1]
        rise_b = (height[b] - height[a]) * (distance[i] - distance[a])
        rise_i = (height[i] - height[a]) * (distance[b] - distance[a])
        if rise_b > rise_i:
            break
        size -= 1
    stack[size] = i
    return size + 1


@scalar
def tangent_from_right(
    stack: NDArray, size: int, distance: NDArray, height: NDArray, d: float, h: float
) -> int:
    """The hull sample that is steepest seen from the point (d, h), which lies right of them all.

    Steepness rises, then falls along the hull; the search doubles its stride from the right end,
    where the answer usually lies, then halves it.
    """
    high = size - 1
    stride = 1
    low = high
    # Find low such that the edge low -> low + 1 no longer gains towards the left.
    while low > 0:
        low = max(high - stride, 0)
        if not _left_is_steeper(stack, distance, height, low + 1, d, h):
            break
        high = low
        stride *= 2
    # The answer lies in [low + 1, high], or is 0 when every edge gained towards the left.
    if low == high:
        return stack[low]
    first, last = low + 1, high
    while first < last:
        middle = (first + last + 1) // 2
        if _left_is_steeper(stack, distance, height, middle, d, h):
            last = middle - 1
        else:
            first = middle
    return stack[first]


@scalar
def _left_is_steeper(
    stack: NDArray, distance: NDArray, height: NDArray, k: int, d: float, h: float
) -> bool:
    """Whether hull point k - 1 is steeper than hull point k seen from (d, h)."""
    a = stack[k - 1]
    b = stack[k]
    return (height[a] - h) * (d - distance[b]) >= (height[b] - h) * (d - distance[a])


@scalar
def highest_above_slope(
    stack: NDArray, size: int, distance: NDArray, height: NDArray, slope: float
) -> int:
    """The hull sample that rises highest above a line of the given slope."""
    first, last = 0, size - 1
    while first < last:
        middle = (first + last) // 2
        a = stack[middle]
        b = stack[middle + 1]
        if height[b] - height[a] > slope * (distance[b] - distance[a]):
            first = middle + 1
        else:
            last = middle
    return stack[first]
