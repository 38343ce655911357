"""Landforms that look natural: rising land, cutting rivers, slipping slopes, filling floors.

Plain numpy and scipy, no planner code. Heights are metres, row 0 is the top (north) of a picture.
Flow goes from each cell to one neighbour; an array of flat cell indices says to which.
"""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage
from scipy.sparse import coo_array, csgraph, csr_array

Floats = NDArray[np.float64]
Indices = NDArray[np.int64]
Mask = NDArray[np.bool_]

NEIGHBOURS = ((-1, -1), (-1, 0), (-1, 1), (0, -1), (0, 1), (1, -1), (1, 0), (1, 1))
PAIRS = ((0, 1), (1, 0), (1, 1), (1, -1))  # each pair of neighbours once


def smooth_noise(
    random: np.random.RandomState,
    shape: tuple[int, int],
    wave_cells: float,
    *,
    stretch: float = 1.0,
    trend_deg: float = 0.0,
) -> Floats:
    """Noise of unit spread whose bumps measure about ``wave_cells``.

    With ``stretch`` above 1 the bumps are drawn out along ``trend_deg``, clockwise from up.
    """
    rows, cols = shape
    spectrum = np.fft.rfft2(random.standard_normal(shape))
    down = np.fft.fftfreq(rows)[:, None]
    right = np.fft.rfftfreq(cols)[None, :]
    trend_rad = np.radians(trend_deg)
    along = -down * np.cos(trend_rad) + right * np.sin(trend_rad)
    across = down * np.sin(trend_rad) + right * np.cos(trend_rad)
    wave_number = np.hypot(along * stretch, across) * wave_cells
    noise = np.fft.irfft2(spectrum * np.exp(-4.0 * wave_number**2), s=shape)
    return np.asarray((noise - noise.mean()) / noise.std())


def fractal_noise(
    random: np.random.RandomState,
    shape: tuple[int, int],
    wave_cells: float,
    *,
    octaves: int,
    roughness: float = 0.5,
    stretch: float = 1.0,
    trend_deg: float = 0.0,
) -> Floats:
    """Noise of unit spread at several scales, each half as wide and ``roughness`` as high."""
    total = np.zeros(shape)
    for octave in range(octaves):
        bumps = smooth_noise(
            random, shape, wave_cells / 2**octave, stretch=stretch, trend_deg=trend_deg
        )
        total += roughness**octave * bumps
    return np.asarray(total / total.std())


def enlarged(values: Floats, factor: int, *, order: int) -> Floats:
    """The same field on cells ``factor`` times smaller (spline of the given order)."""
    rows, cols = (np.arange(n * factor) + 0.5 for n in values.shape)
    places = np.meshgrid(rows / factor - 0.5, cols / factor - 0.5, indexing="ij")
    return np.asarray(ndimage.map_coordinates(values, places, order=order, mode="nearest"))


def pair_slices(shape: tuple[int, int], down: int, right: int) -> tuple[tuple, tuple]:
    """Two windows of an array that lay each cell on its neighbour ``down`` and ``right`` of it."""
    rows, cols = shape
    here = (slice(0, rows - down), slice(max(0, -right), cols - max(0, right)))
    there = (slice(down, rows), slice(max(0, right), cols - max(0, -right)))
    return here, there


def steepest_receivers(height: Floats, outlet: Mask) -> Indices:
    """The neighbour down the steepest slope; the cell itself in a pit and at an outlet."""
    rows, cols = height.shape
    padded = np.pad(height, 1, constant_values=np.inf)
    best_slope = np.zeros(height.shape)
    step = np.zeros(height.shape, dtype=np.int64)
    for down, right in NEIGHBOURS:
        neighbour = padded[1 + down : 1 + down + rows, 1 + right : 1 + right + cols]
        slope = (height - neighbour) / np.hypot(down, right)
        better = slope > best_slope
        best_slope[better] = slope[better]
        step[better] = down * cols + right
    step[outlet] = 0
    return np.asarray(np.arange(height.size) + step.ravel())


def ends_and_depths(receivers: Indices) -> tuple[Indices, Indices]:
    """Where the water of each cell ends, and in how many steps (found by doubling the steps)."""
    end = receivers.copy()
    depth = (receivers != np.arange(receivers.size)).astype(np.int64)
    while True:
        further = end[end]
        if np.array_equal(further, end):
            return end, depth
        depth += depth[end]
        end = further


def sparse_graph(weight: Floats, start: Indices, end: Indices, nodes: int) -> csr_array:
    """Graph as scipy's routines take it; older ones take no indices of 64 bits."""
    places = (start.astype(np.int32), end.astype(np.int32))
    return coo_array((weight, places), shape=(nodes, nodes)).tocsr()


def lowest_passes(height: Floats, basin: Indices) -> tuple[Indices, ...]:
    """For each two basins that touch: both numbers, and the two cells of the lowest pass."""
    flat = np.arange(height.size).reshape(height.shape)
    ends_a, ends_b = [], []
    for down, right in PAIRS:
        here, there = pair_slices(height.shape, down, right)
        apart = basin[here] != basin[there]
        ends_a.append(flat[here][apart])
        ends_b.append(flat[there][apart])
    a, b = np.concatenate(ends_a), np.concatenate(ends_b)
    of_a, of_b = basin.ravel()[a], basin.ravel()[b]
    low, high = np.minimum(of_a, of_b), np.maximum(of_a, of_b)
    level = np.maximum(height.ravel()[a], height.ravel()[b])
    order = np.lexsort((level, high, low))
    a, b, low, high = a[order], b[order], low[order], high[order]
    first = np.append(True, (low[1:] != low[:-1]) | (high[1:] != high[:-1]))
    return low[first], high[first], a[first], b[first]


def routed_receivers(height: Floats, outlet: Mask) -> Indices:
    """Steepest receivers, except that each pit spills over a pass: all water reaches an outlet.

    The passes are the edges of a minimum spanning tree of the basins, as in Cordonnier, Bovy and
    Braun (2019), Earth Surface Dynamics 7, 549-562.
    """
    receivers = steepest_receivers(height, outlet)
    pits = np.flatnonzero((receivers == np.arange(receivers.size)) & ~outlet.ravel())
    if pits.size == 0:
        return receivers
    end, _ = ends_and_depths(receivers)
    number_of_end = np.zeros(height.size, dtype=np.int64)  # 0: every basin with an outlet
    number_of_end[pits] = np.arange(1, pits.size + 1)
    basin = number_of_end[end].reshape(height.shape)
    low, high, a, b = lowest_passes(height, basin)
    level = np.maximum(height.ravel()[a], height.ravel()[b])
    basins = pits.size + 1
    graph = sparse_graph(level - level.min() + 1.0, low, high, basins)
    tree = csgraph.minimum_spanning_tree(graph)
    _, parent = csgraph.breadth_first_order(tree, 0, directed=False)
    child = np.arange(1, basins)
    key = np.minimum(child, parent[1:]) * basins + np.maximum(child, parent[1:])
    edge = np.searchsorted(low * basins + high, key)
    receivers[pits] = np.where(basin.ravel()[a[edge]] == child, b[edge], a[edge])
    return receivers


class Drainage:
    """Who drains to whom, ordered so that a walk along all rivers is a short loop over levels."""

    def __init__(self, height: Floats, outlet: Mask) -> None:
        self.shape = height.shape
        self.receivers = routed_receivers(height, outlet)
        _, depth = ends_and_depths(self.receivers)
        self.order = np.argsort(depth, kind="stable")
        self.starts = np.searchsorted(depth[self.order], np.arange(depth.max() + 2))
        row, col = np.divmod(np.arange(height.size), height.shape[1])
        row_below, col_below = np.divmod(self.receivers, height.shape[1])
        self.length_cells = np.hypot(row - row_below, col - col_below)

    def levels(self) -> Iterator[Indices]:
        """Cells 1, 2, 3 ... steps from their outlet."""
        for level in range(1, len(self.starts) - 1):
            yield self.order[self.starts[level] : self.starts[level + 1]]

    def accumulated(self, source: Floats) -> Floats:
        """Sum of ``source`` over everything upstream of each cell, itself included."""
        total = source.ravel().copy()
        for cells in reversed(list(self.levels())):
            np.add.at(total, self.receivers[cells], total[cells])
        return np.asarray(total.reshape(self.shape))


def incised(height: Floats, drainage: Drainage, strength: Floats, cell_m: float) -> Floats:
    """One implicit step of stream power with slope exponent 1; ``strength`` is metres of retreat.

    Braun and Willett (2013), Geomorphology 180-181, 170-179. Nothing is cut where a pit spills up.
    """
    result = height.ravel().copy()
    factor = strength.ravel() / np.maximum(drainage.length_cells, 1.0) / cell_m
    for cells in drainage.levels():
        here, below = result[cells], result[drainage.receivers[cells]]
        cut = (here + factor[cells] * below) / (1.0 + factor[cells])
        result[cells] = np.where(here > below, cut, here)
    return np.asarray(result.reshape(height.shape))


def crept(height: Floats, diffusion_m2: float, cell_m: float) -> Floats:
    """Slopes rounded by soil creep: linear diffusion, in as many stable steps as it needs."""
    share = diffusion_m2 / cell_m**2
    steps = max(1, int(np.ceil(share / 0.2)))
    for _ in range(steps):
        height = height + share / steps * ndimage.laplace(height, mode="nearest")
    return height


def slipped(height: Floats, cell_m: float, talus: float, *, rounds: int = 3) -> Floats:
    """Rock moved downhill wherever a slope exceeds ``talus`` (rise over run). Volume is kept."""
    for _ in range(rounds):
        moved = np.zeros_like(height)
        for down, right in PAIRS:
            here, there = pair_slices(height.shape, down, right)
            drop = height[here] - height[there]
            excess = np.abs(drop) - talus * cell_m * np.hypot(down, right)
            shift = 0.12 * np.sign(drop) * np.maximum(excess, 0.0)
            moved[here] -= shift
            moved[there] += shift
        height = height + moved
    return height


def alluviated(
    height: Floats,
    area_m2: Floats,
    cell_m: float,
    *,
    stream_m2: float,
    depth_m: float,
    reach_m: float = 160.0,
) -> Floats:
    """Valleys filled to a floor that follows their stream: wide where the river is large.

    The fill over a stream is 1 m at ``stream_m2`` and grows by ``depth_m`` per tenfold drainage
    area. Beside the stream the floor is a weighted mean of the stream levels within reach.
    """
    stream = area_m2 > stream_m2
    tenfolds = np.log10(np.maximum(area_m2, stream_m2) / stream_m2)
    weight = np.where(stream, np.sqrt(area_m2 / stream_m2), 0.0)
    spread = reach_m / cell_m
    level = height + 1.0 + depth_m * tenfolds
    total = ndimage.gaussian_filter(weight * level, spread, truncate=6.0)
    density = ndimage.gaussian_filter(weight, spread, truncate=6.0)
    single = 1.0 / (spread * np.sqrt(2.0 * np.pi))  # density on a lone stream of weight 1
    near = density > 1e-7 * single
    distance = np.sqrt(2.0 * np.log(np.maximum(single / np.maximum(density, 1e-12), 1.0)))
    floor = np.where(near, total / np.maximum(density, 1e-12), -1e4)
    floor = floor - 5.0 * np.maximum(distance - 1.5, 0.0) ** 2
    foot_m = 4.0  # how gently a slope runs out into the floor
    above = (height - floor) / foot_m
    rounded = np.where(above > 30, above, np.log1p(np.exp(np.minimum(above, 30))))
    return np.asarray(floor + foot_m * rounded)


def least_cost_line(cost: Floats, start: tuple[int, int], end: tuple[int, int]) -> Floats:
    """Rows and columns (n, 2) of the cheapest walk over a raster, cost being per cell crossed."""
    flat = np.arange(cost.size).reshape(cost.shape)
    starts, ends, prices = [], [], []
    for down, right in PAIRS:
        here, there = pair_slices(cost.shape, down, right)
        starts.append(flat[here].ravel())
        ends.append(flat[there].ravel())
        prices.append((0.5 * np.hypot(down, right) * (cost[here] + cost[there])).ravel())
    graph = sparse_graph(
        np.concatenate(prices), np.concatenate(starts), np.concatenate(ends), cost.size
    )
    first = start[0] * cost.shape[1] + start[1]
    here = end[0] * cost.shape[1] + end[1]
    _, before = csgraph.dijkstra(graph, directed=False, indices=first, return_predecessors=True)
    walk = [here]
    while walk[-1] != first:
        walk.append(int(before[walk[-1]]))
    return np.stack(np.divmod(np.array(walk[::-1]), cost.shape[1]), axis=1).astype(float)
