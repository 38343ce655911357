"""What a fan of radials is given and what it keeps, as named tuples that kernels accept.

A fan is LANES radials side by side, walked outwards together: each step is done for all of them at
once, with vectors (``physics/_lanes.py``). A cell lies between two radials of its fan and takes
what is known of both in proportion, so a fan has one cell at most between any two neighbours on a
line. What belongs to a radial, or to the cell between it and the next, lies in three flat arrays,
one for each kind of number, at the offsets below.
"""

from typing import NamedTuple

from numpy.typing import NDArray

from planner.physics._lanes import LANES

# What became of a cell.
COMPUTED, OUT_OF_RANGE, NO_DATA, CROSSES_HOLE = 0, 1, 2, 3

# Nearer than this two antennas are in one place and have no path between them.
LEAST_DISTANCE_M = 1.0

INTERVALS = LANES - 1  # between the radials of a fan
SPACING = 1.0  # cells between radials on a ring's outer circle, at most 1
# The last samples before a cell lie on the cell's own straight line to the mast, where its exact
# path has them: an edge close to the receiver matters most, and terrain between two radials is not
# quite what lies in proportion between them.
OWN_SAMPLES = 2
BLOCK = 16  # samples that share one bound
GROUP = 4  # blocks that share one further bound
REGION = 16  # blocks that share one more
LID = 4 * LANES  # numbers of a lid
RECALLED = 8  # blocks that are looked at first because they held an extreme at the line before

# Below any height or slope. Heights of holes are stored so, too: a vector sum of a finite number
# times 0 and another height is that height, of NaN it is NaN.
LOWEST = -1e30


class Mast(NamedTuple):
    """Where the mast stands on the grid and how the grid's lengths relate to true ones."""

    row: float  # fractional, whole numbers are cell centres
    col: float
    row_start: int  # first row and column of the window whose cells are computed
    col_start: int
    cell_m: float
    scale: float  # of the projection at the mast
    scale_gradient_east_per_m: float
    scale_gradient_north_per_m: float
    ground_m: float


class Link(NamedTuple):
    """What the loss depends on besides the terrain."""

    tx_height_m: float  # above the datum
    receiver_height_m: float  # above the cell's ground
    earth_radius_m: float  # effective
    frequency_mhz: float
    wavelength_m: float
    vertical: bool
    radius_m: float  # cells beyond it are out of range
    obstacle_clearing_m: float  # obstacles nearer than this to either end do not count


class Layers(NamedTuple):
    """What is known of every cell of the window; arrays of one shape, written cell by cell."""

    path_loss_db: NDArray  # float32
    departure_elevation_deg: NDArray  # float32
    fresnel_clearance_ratio: NDArray  # float32
    status: NDArray  # uint8


class Wedge(NamedTuple):
    """A quarter of the plane: lines of cells (rows or columns) follow each other away from it."""

    along_rows: bool  # the lines are columns and the lateral position counts rows
    forward: int  # +1 or -1: the next line's number
    main: float  # the mast's place across the lines
    side: float  # the mast's place along the lines
    first_line: int  # nearest line
    first_t: float  # its distance from the mast in cells, above 0 and at most 1
    lateral_last: int  # largest index along a line in the terrain
    last_of_all: int  # number of its last line
    line_stride: int  # from line to line, and along a line, in the terrain's flat array
    lateral_stride: int
    line_low: int  # the window's first and last line and place along a line
    line_high: int
    lateral_low: int
    lateral_high: int


class Fan(NamedTuple):
    """Working arrays of one fan, all flat. Sample i of a radial is i + 1 steps out.

    Heights are relative to the mast's antenna. "Bent" heights have x^2 / (2 * earth radius)
    subtracted, x being the distance from the mast: that turns the curved earth into a flat one,
    and a straight ray stays straight.
    """

    narrow: NDArray  # float32, offsets below
    wide: NDArray  # float64
    place: NDArray  # int32
    ground: NDArray  # float32, bent, sample by sample LANES heights
    surface: NDArray  # float32, the same with obstacles; the same array without any
    # Straight lids over the bent surface, as four rows: its heights over the first sample of a
    # block, over the one after its last, and by how much the next lane's two are higher. Blocks,
    # then groups, then regions of them.
    lids: NDArray  # float32
    tables: NDArray  # float32: 1 / sqrt(i + 1) of sample i, then what Tables tells
    recalled: NDArray  # int64, for each of two searches: number of blocks, then the blocks


class Tables(NamedTuple):
    """Where in ``lids`` and ``tables`` things begin."""

    group_lids: int
    region_lids: int
    edge_root: int  # sqrt of the product of the distances of a block's first sample to both ends
    edge_inverse: int  # 1 / that
    last_steps: int  # distance of the line for which they were computed


# Offsets into ``narrow``.
BULGE = 0 * LANES  # of the earth, per line squared
BULGE_DRIFT = 1 * LANES  # by how much less of it per line: the projection's scale changes
SURFACE_SLOPE = 2 * LANES  # steepest bent surface seen from the mast so far, per step
GROUND_SLOPE = 3 * LANES  # the same of the bare ground, not bent
SUM = 4 * LANES  # of the ground's heights so far
MOMENT = 5 * LANES  # of heights times steps
LAST_GROUND = 6 * LANES  # the latest sample's ground
HOLES = 7 * LANES  # 0, or NaN when a hole lies behind
# of the cells of the present line
SHARE_OF_NEXT = 8 * LANES  # how far towards the next radial the cell lies, 0 to 1
DISTANCE = 9 * LANES  # true, to the cell
WANTED = 10 * LANES  # 1 where there is a cell to compute
GROUND = 11 * LANES  # of the cell
RX_ABOVE = 12 * LANES  # receiving antenna above the cell's ground
CELL_HOLES = 13 * LANES  # 0, or NaN when a hole lies before the cell
TX_SLOPE = 14 * LANES  # steepest bent surface seen from the mast on the way to the cell
CELL_GROUND_SLOPE = 15 * LANES  # steepest bare ground, not bent
PER_METRE = 16 * LANES  # steps per true metre on the way to the cell
NU_SCALE = 17 * LANES  # by which BEST_NEAR becomes nu
OWN_SHARE = 18 * LANES  # and 19: own samples' distance from the cell as a share of the whole
OWN_BENT = 21 * LANES  # and 22: their bent surface
RX_BENT = 24 * LANES  # receiving antenna, bent
DIRECT = 25 * LANES  # slope of the ray to it, per step
BEST_TANGENT = 26 * LANES  # steepest seen from the cell so far
BEST_NEAR = 27 * LANES  # largest nu so far, but for a factor of the cell's
LOSS = 28 * LANES
ELEVATION = 29 * LANES
RATIO = 30 * LANES
SPHERE = 31 * LANES  # 1 where the spherical earth may add something
V1 = 32 * LANES  # sums of the smooth surface's fit, in steps
V2 = 33 * LANES
OBSTRUCTION = 34 * LANES  # most by which bare ground without curvature rises above the ray
OBSTRUCTION_SLOPE = 35 * LANES  # steepest of it seen from the cell, less the ray's slope
ROW_STEEPNESS = 36 * LANES  # of the samples that are looked at: 1 / distance from the cell
ROW_WEIGHT = 37 * LANES  # 1 / sqrt of the product of the distances to both ends
ROW_PLACE = 38 * LANES  # steps from the mast
STEP_BULGE = 39 * LANES  # of the earth, per step squared
STEP_DRIFT = 40 * LANES  # by how much less of it per step
MIDDLE_SLOPE = 41 * LANES  # steepest surface seen from the mast halfway between two radials
NARROW_ROWS = 42

# Offsets into ``wide``.
SLOPE = 0 * LANES  # by which each radial moves sideways from line to line
ACROSS = 2 * LANES  # lateral distance of the cell from the mast, in cells
WIDE_ROWS = 3

# Offsets into ``place``.
CELL = 0 * LANES  # lateral index of the cell
SURFACE_AT = 1 * LANES  # sample that is steepest seen from the mast so far
STATUS = 2 * LANES  # what became of it
MIDDLE_AT = 3 * LANES  # sample that is steepest halfway to the next radial
PLACES = 4 * LANES
