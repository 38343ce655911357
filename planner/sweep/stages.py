"""The stages of a fan's walk from line to line, for every kernel that walks fans."""

from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.sweep.course import Course
from planner.sweep.extremes import search
from planner.sweep.own_line import count_cleared, start_search
from planner.sweep.sampling_lines import (
    include_sample,
    next_line,
    raise_horizon,
    take_sample,
)
from planner.sweep.state import Link, Wedge


@scalar
def include_samples(
    narrow: NDArray,
    bent_ground: NDArray,
    surface: NDArray,
    block_lid: NDArray,
    group_lid: NDArray,
    region_lid: NDArray,
    course: Course,
    included: int,
    samples: int,
    risen: int,
    far: int,
    has_obstacles: bool,
) -> None:
    """Let samples ``included`` up to ``samples`` count, ``risen`` up to ``far`` with obstacles."""
    lanes = course.lanes
    for sample in range(included, samples):
        at = (sample + 1.0) / course.stretch
        include_sample(
            narrow, bent_ground, surface, lanes, sample, at, has_obstacles, course.clearing_bulge_m
        )
    for sample in range(risen, far):
        raise_horizon(narrow, surface, block_lid, group_lid, region_lid, lanes, sample)


@scalar
def find_extremes(
    narrow: NDArray,
    bent_ground: NDArray,
    surface: NDArray,
    flat_surface: NDArray,
    block_lid: NDArray,
    group_lid: NDArray,
    region_lid: NDArray,
    steepness: NDArray,
    weight: NDArray,
    root: NDArray,
    row_steepness: NDArray,
    row_weight: NDArray,
    recalled: NDArray,
    lanes: int,
    samples: int,
    far: int,
    steps: float,
    link: Link,
) -> None:
    """The steepest point seen from each receiver, and the one with the largest nu."""
    start_search(narrow, lanes, steps)
    if far < samples:
        count_cleared(narrow, bent_ground, surface, root, lanes, far, samples, steps, link, False)
    search(
        narrow,
        surface,
        flat_surface,
        block_lid,
        group_lid,
        region_lid,
        steepness,
        weight,
        root,
        row_steepness,
        row_weight,
        recalled,
        lanes,
        far,
        steps,
    )


@scalar
def sample_line(
    narrow: NDArray,
    place: NDArray,
    bent_ground: NDArray,
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
    lanes = course.lanes
    while (taken + 1.0) / course.stretch <= t:
        back = t - (taken + 1.0) / course.stretch
        take_sample(
            narrow,
            place,
            bent_ground,
            surface,
            flat_ground,
            flat_obstacle,
            lanes,
            wedge,
            line,
            back,
            taken,
            link,
        )
        taken += 1
    next_line(place, lanes)
    return taken
