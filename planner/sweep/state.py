"""What the walk along a radial is given and what it keeps, as named tuples that kernels accept."""

from typing import NamedTuple

from numpy.typing import NDArray

# What became of a cell.
COMPUTED, OUT_OF_RANGE, NO_DATA, CROSSES_HOLE = 0, 1, 2, 3


# Nearer than this two antennas are in one place and have no path between them.
LEAST_DISTANCE_M = 1.0


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


class State(NamedTuple):
    """Working arrays of one radial; index i is the i-th sample."""

    distance: NDArray  # true metres from the mast
    ground: NDArray  # bare ground above the datum
    bent_ground: NDArray  # the same, bent
    bent: NDArray  # ground with obstacles, bent
    block_top: NDArray  # highest entry of ``bent`` per block
    hull: NDArray  # stack over ``bent``
    ground_hull: NDArray  # stack over ``ground``
    own_distance: NDArray  # the same three for the cell's own samples, nearest to it first
    own_ground: NDArray
    own_bent: NDArray
