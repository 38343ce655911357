"""The stages of a fan's walk from line to line, for every kernel that walks fans."""

from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.sweep.course import Course
from planner.sweep.own_line import count_cleared, start_search
from planner.sweep.sampling_lines import include_sample, look_ahead, raise_horizon, take_sample
from planner.sweep.search import search_extremes
from planner.sweep.state import Link, Tables, Wedge


@scalar
def include_samples(
    narrow: NDArray,
    place: NDArray,
    ground: NDArray,
    surface: NDArray,
    lids: NDArray,
    at: Tables,
    course: Course,
    included: int,
    samples: int,
    risen: int,
    far: int,
    has_obstacles: bool,
) -> None:
    """Let samples ``included`` up to ``samples`` count, ``risen`` up to ``far`` with obstacles."""
    for sample in range(included, samples):
        t = (sample + 1.0) / course.stretch
        include_sample(narrow, ground, surface, sample, t, has_obstacles, course.clearing_bulge_m)
    for sample in range(risen, far):
        raise_horizon(narrow, place, surface, lids, at, sample)


@scalar
def find_extremes(
    narrow: NDArray,
    ground: NDArray,
    surface: NDArray,
    lids: NDArray,
    tables: NDArray,
    recalled: NDArray,
    at: Tables,
    samples: int,
    far: int,
    steps: float,
    link: Link,
) -> None:
    """The steepest point seen from each receiver, and the one with the largest nu."""
    start_search(narrow, steps)
    if far < samples:
        count_cleared(narrow, ground, surface, tables, far, samples, steps, link, False)
    search_extremes(narrow, surface, lids, tables, recalled, at, far, steps)


@scalar
def sample_line(
    slopes: NDArray,
    ground: NDArray,
    surface: NDArray,
    flat_ground: NDArray,
    flat_obstacle: NDArray,
    wedge: Wedge,
    line: int,
    link: Link,
    course: Course,
    taken: int,
    t: float,
) -> int:
    """Take the samples between the last line and this one; how many there are by now."""
    look_ahead(slopes, flat_ground, wedge, line, t, course)
    if flat_obstacle.size > 0:
        look_ahead(slopes, flat_obstacle, wedge, line, t, course)
    while (taken + 1.0) / course.stretch <= t:
        back = t - (taken + 1.0) / course.stretch
        take_sample(
            slopes, ground, surface, flat_ground, flat_obstacle, wedge, line, t, back, taken, link
        )
        taken += 1
    return taken
