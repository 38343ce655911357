"""The walk of fans of radials that gives every cell in range its path loss.

Cells around the mast are split into four wedges by their longer axis, and each wedge into rings
that double in radius. In a ring, radials run from the mast to its outer circle, where they are
0.7 cells apart, so they are 0.35 to 0.7 cells apart where the ring has cells; a cell belongs to the
radial between whose edges it lies. Each cell is written once, by one radial, whatever the number of
threads. The cell's distance, its ground and the last samples before it are its own; only the
terrain further towards the mast is the radial's.
"""

from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.sweep.cells import losses, may_meet_sphere, write_cells
from planner.sweep.course import course_of, new_fan, samples_before, wedge_of
from planner.sweep.curved_earth import excess_over_sphere_db
from planner.sweep.own_line import count_cleared, own_cells, own_lines, own_profile, own_rays
from planner.sweep.sampling_lines import start_fan
from planner.sweep.stages import find_extremes, include_samples, sample_line
from planner.sweep.state import LOSS, SPHERE, Fan, Layers, Link, Mast, Wedge


@scalar
def _walk(
    fan: Fan,
    wedge: Wedge,
    outer: int,
    first_radial: int,
    inner: int,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    layers: Layers,
) -> None:
    """Walk one fan outwards to the ring's outer edge and compute the ring's cells on the way."""
    # Unpacked once: every look into a tuple of arrays counts a reference, which costs in a loop.
    narrow, wide, place = fan.narrow, fan.wide, fan.place
    bent_ground, surface = fan.bent_ground, fan.bent_surface
    block_lid, group_lid, region_lid = fan.block_lid, fan.group_lid, fan.region_lid
    steepness, weight, root = fan.edge_steepness, fan.edge_weight, fan.root_steepness
    row_steepness, row_weight, recalled = fan.row_steepness, fan.row_weight, fan.recalled
    flat_surface = surface.reshape(surface.size)
    flat_ground, flat_obstacle = ground.reshape(ground.size), obstacle.reshape(obstacle.size)
    path_loss, elevation = layers.path_loss_db, layers.departure_elevation_deg
    clearance, status = layers.fresnel_clearance_ratio, layers.status
    has_obstacles = obstacle.size > 0
    course = course_of(outer, first_radial, inner, has_obstacles, mast, link)
    lanes = course.lanes
    start_fan(narrow, place, lanes, first_radial, outer, wedge, mast, link)
    recalled[0] = 0
    taken, included, risen = 0, 0, 0
    line = wedge.first_line
    t = wedge.first_t
    while wedge.line_low <= line <= wedge.line_high and t <= course.last_t:
        steps = t * course.stretch
        samples, far = samples_before(steps, has_obstacles, course.clearing_steps)
        include_samples(
            narrow,
            bent_ground,
            surface,
            block_lid,
            group_lid,
            region_lid,
            course,
            included,
            samples,
            risen,
            far,
            has_obstacles,
        )
        included, risen = max(included, samples), max(risen, far)
        if t > course.first_t and own_cells(
            narrow, wide, place, lanes, t, wedge, mast, inner, outer, link.radius_m
        ):
            own_lines(
                narrow, wide, place, lanes, t, flat_ground, flat_obstacle, wedge, line, mast, link
            )
            own_profile(narrow, wide, lanes, t, steps, has_obstacles, link)
            own_rays(narrow, lanes, steps, link)
            if far < samples:
                count_cleared(
                    narrow, bent_ground, surface, root, lanes, far, samples, steps, link, True
                )
            find_extremes(
                narrow,
                bent_ground,
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
                samples,
                far,
                steps,
                link,
            )
            losses(narrow, lanes, link)
            if t > course.spherical_t and may_meet_sphere(
                narrow, lanes, samples, steps, mast, link
            ):
                for lane in range(lanes):
                    if narrow[SPHERE + lane] > 0.0:
                        narrow[LOSS + lane] += excess_over_sphere_db(
                            narrow, bent_ground, block_lid, lane, samples, far, t, steps, mast, link
                        )
            write_cells(
                narrow,
                place,
                lanes,
                wedge,
                line,
                mast,
                path_loss,
                elevation,
                clearance,
                status,
            )
        taken = sample_line(
            narrow,
            place,
            bent_ground,
            surface,
            flat_ground,
            flat_obstacle,
            wedge,
            line,
            link,
            course,
            taken,
            t,
        )
        t += 1.0
        line += wedge.forward


@scalar
def walk_fan(
    wedge_number: int,
    outer: int,
    first_radial: int,
    inner: int,
    ground: NDArray,
    obstacle: NDArray,
    mast: Mast,
    link: Link,
    layers: Layers,
) -> None:
    """Compute the cells of one fan, see :func:`fans`. Fans may be walked in any order, at once."""
    fan = new_fan(outer, obstacle.size > 0)
    wedge = wedge_of(wedge_number, ground, mast, *layers.status.shape)
    _walk(fan, wedge, outer, first_radial, inner, ground, obstacle, mast, link, layers)
