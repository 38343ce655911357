"""What a fan of radials is given and what it keeps, as named tuples that kernels accept.

A fan is up to LANES radials side by side, walked outwards together so that each step is a vector
operation over the lanes. Loops over lanes run to ``lanes``, known at run time only, never to the
constant: a constant one is unrolled before it can be vectorised.
What belongs to one lane lies in three flat scratch arrays, one for each kind of number, at the
offsets below plus the lane's number: loops that stay within one array, at offsets known to the
compiler, need no check at run time that their arrays are apart.
"""

from typing import NamedTuple

from numpy.typing import NDArray

# What became of a cell.
COMPUTED, OUT_OF_RANGE, NO_DATA, CROSSES_HOLE = 0, 1, 2, 3

# Nearer than this two antennas are in one place and have no path between them.
LEAST_DISTANCE_M = 1.0

LANES = 32
# Cells between radials on a ring's outer circle. Half as far a cell's own line to the mast may lie
# from its radial: 1 takes two thirds of the time and gives half as much again of difference.
SPACING = 0.7
# The last samples before a cell lie on the cell's own straight line to the mast, where its exact
# path has them: an edge close to the receiver matters most, and half a cell aside is too far there.
# Sample q must lie between the q-th and the (q-1)-th line before the cell's, which of a fourth some
# do not. own_line.py takes them one by one, so that their offsets are known to the compiler.
OWN_SAMPLES = 3
BLOCK = 16  # samples that share one bound
GROUP = 4  # blocks that share one further bound
REGION = 16  # blocks that share one more
RECALLED = 8  # blocks that are looked at first because they held an extreme at the line before


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
    """Working arrays of one fan. Row i of the histories is the i-th sample, i + 1 steps out.

    Heights are relative to the mast's antenna. "Bent" heights have x^2 / (2 * earth radius)
    subtracted, x being the distance from the mast: that turns the curved earth into a flat one,
    and a straight ray stays straight.
    """

    narrow: NDArray  # float32 scratch, offsets below
    wide: NDArray  # float64 scratch
    place: NDArray  # int64 scratch
    bent_ground: NDArray  # [sample, lane] float32
    bent_surface: NDArray  # [sample, lane] float32, with obstacles; the same array without any
    # Straight lids over the bent surface: rows 2 n and 2 n + 1 hold the lid's height at the first
    # sample of block n and at the one after its last.
    block_lid: NDArray  # [2 * block, lane] float32
    group_lid: NDArray  # [2 * group of blocks, lane] float32
    region_lid: NDArray  # [2 * region of blocks, lane] float32
    edge_steepness: NDArray  # [block] float32, 1 / distance from the cell to a block's first sample
    edge_weight: NDArray  # [block] float32, 1 / sqrt of the product of its distances to both ends
    root_steepness: NDArray  # [sample] float32, 1 / sqrt(i + 1)
    row_steepness: NDArray  # [BLOCK] float32, the same two for the samples that are looked at
    row_weight: NDArray  # [BLOCK] float32
    recalled: NDArray  # int64: number of blocks, then the blocks


# Offsets into ``narrow``.
FRACTION = 0 * LANES  # between the two cells beside a crossing
LOWER = 1 * LANES  # ground of those two cells
UPPER = 2 * LANES
CROSSING = 3 * LANES  # ground or obstacles on a line beside a sample
LAST_CROSSING = 4 * LANES  # and on the line before it
BULGE = 7 * LANES  # of the earth, per line squared
BULGE_DRIFT = 8 * LANES  # by how much less of it per line: the projection's scale changes
SURFACE_SLOPE = 9 * LANES  # steepest bent surface seen from the mast so far, per step
GROUND_SLOPE = 10 * LANES  # the same of the bare ground, not bent
SUM = 11 * LANES  # of the ground's heights so far
MOMENT = 12 * LANES  # of heights times steps
LAST_GROUND = 13 * LANES  # the latest sample's ground
HOLES = 14 * LANES  # 0, or NaN when a hole lies behind
# of the cells of the present line
RX_BENT = 15 * LANES  # receiving antenna, bent
DIRECT = 16 * LANES  # slope of the ray to it, per step
TX_SLOPE = 17 * LANES  # steepest seen from the mast on the way to the cell
BEST_TANGENT = 18 * LANES  # steepest seen from the cell so far
BEST_NEAR = 19 * LANES  # largest nu so far, but for a factor of the cell's
CELL_HOLES = 20 * LANES  # 0, or NaN when a hole lies before the cell
WANTED = 21 * LANES  # 1 where the lane has a cell to compute
SHARE = 22 * LANES  # to 24: own samples' distance from the cell as a share of the whole
OWN_BENT = 25 * LANES  # to 27: their bent surface
OWN_CROSSING = 28 * LANES  # to 31: ground where the cell's own line crosses this line and before
OWN_WOOD = 32 * LANES  # to 35: obstacles there
CELL_GROUND_SLOPE = 36 * LANES  # steepest bare ground seen from the mast
DISTANCE = 37 * LANES  # true, to the cell
GROUND = 38 * LANES  # of the cell
SAMPLE_SHARE = 39 * LANES  # spacing of the cell's exact samples over its distance
PER_METRE = 40 * LANES  # steps per true metre on the way to the cell
NU_SCALE = 41 * LANES  # by which BEST_NEAR becomes nu
LOSS = 42 * LANES
ELEVATION = 43 * LANES
RATIO = 44 * LANES
TX_EFFECTIVE = 45 * LANES  # heights above the smooth surface
RX_EFFECTIVE = 46 * LANES
V1 = 47 * LANES  # sums of the smooth surface's fit, in steps
V2 = 48 * LANES
SPHERE = 5 * LANES  # 1 where the spherical earth may add something
RX_ABOVE = 6 * LANES  # receiving antenna above the cell's ground
NARROW_ROWS = 49

# Offsets into ``wide``.
ACROSS = 0 * LANES  # lateral distance of the cell from the mast, in cells
WIDE_ROWS = 1

# Offsets into ``place``; the last two hold one entry more than there are lanes. What is computed
# from them stands before them: a loop that stored further on could not be told from one that
# overtakes itself.
CELL = 0 * LANES  # lateral index of the lane's cell
INDEX = 1 * LANES  # lateral index of the cell below a crossing
NEXT_INDEX = 2 * LANES  # and of the one above
EDGE = 3 * LANES  # lateral places of the lanes' edges on the present line, in 2^-32 cells
EDGE_STEP = 4 * LANES + 1  # by which they move from line to line
PLACES = 5 * LANES + 2

FIXED = 4294967296.0  # 2^32, the fixed point of EDGE
