"""The walk of fans of radials that gives every cell in range its path loss.

Cells around the mast are split into four wedges by their longer axis, and each wedge into rings
that double in radius. In a ring, radials run from the mast to its outer circle, where they are a
cell apart, so they are half a cell to a cell apart where the ring has cells; a cell lies between
two of them. Each cell is written once, in one fan, whatever the number of threads. The cell's
distance, its ground and the last samples before it are its own; the terrain further towards the
mast is what the two radials have, in proportion.
"""

from numpy.typing import NDArray

from planner.physics._jit import scalar
from planner.physics._lanes import borrowed
from planner.sweep.cells import losses, may_meet_sphere, write_cells
from planner.sweep.course import course_of, new_fan, samples_before, tables_of, wedge_of
from planner.sweep.curved_earth import add_excess_over_sphere
from planner.sweep.own_line import count_cleared, own_cells, own_profile, own_rays
from planner.sweep.sampling_lines import start_fan
from planner.sweep.stages import find_extremes, include_samples, sample_line
from planner.sweep.state import Fan, Layers, Link, Mast, Tables, Wedge


@scalar
def _walk(
    fan: Fan,
    at: Tables,
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
    narrow, slopes, place = borrowed(fan.narrow), borrowed(fan.wide), borrowed(fan.place)
    bent_ground, surface = borrowed(fan.ground), borrowed(fan.surface)
    lids, tables = borrowed(fan.lids), borrowed(fan.tables)
    recalled = borrowed(fan.recalled)
    flat_ground = borrowed(ground.reshape(ground.size))
    flat_obstacle = borrowed(obstacle.reshape(obstacle.size))
    size, cols = layers.status.size, layers.status.shape[1]
    path_loss = borrowed(layers.path_loss_db.reshape(size))
    elevation = borrowed(layers.departure_elevation_deg.reshape(size))
    clearance = borrowed(layers.fresnel_clearance_ratio.reshape(size))
    status = borrowed(layers.status.reshape(size))
    has_obstacles = obstacle.size > 0
    course = course_of(outer, first_radial, inner, has_obstacles, mast, link)
    start_fan(narrow, slopes, place, surface, first_radial, outer, wedge, mast, link, course)
    taken, included, risen = 0, 0, 0
    line = wedge.first_line
    t = wedge.first_t
    while wedge.line_low <= line <= wedge.line_high and t <= course.last_t:
        steps = t * course.stretch
        samples, far = samples_before(steps, has_obstacles, course.clearing_steps)
        include_samples(
            narrow,
            place,
            bent_ground,
            surface,
            lids,
            at,
            course,
            included,
            samples,
            risen,
            far,
            has_obstacles,
        )
        included, risen = max(included, samples), max(risen, far)
        if t > course.first_t and own_cells(
            narrow, slopes, place, t, wedge, mast, inner, outer, link.radius_m
        ):
            own_profile(
                narrow,
                slopes,
                place,
                surface,
                flat_ground,
                flat_obstacle,
                t,
                steps,
                wedge,
                line,
                mast,
                link,
            )
            own_rays(narrow, steps, link)
            if far < samples:
                count_cleared(narrow, bent_ground, surface, tables, far, samples, steps, link, True)
            find_extremes(
                narrow,
                bent_ground,
                surface,
                lids,
                tables,
                recalled,
                at,
                samples,
                far,
                steps,
                link,
            )
            losses(narrow, link)
            if t > course.spherical_t and may_meet_sphere(narrow, samples, steps, mast, link):
                add_excess_over_sphere(
                    narrow,
                    bent_ground,
                    lids,
                    tables,
                    recalled,
                    at,
                    samples,
                    far,
                    t,
                    steps,
                    mast,
                    link,
                )
            write_cells(
                narrow, place, wedge, line, mast, path_loss, elevation, clearance, status, cols
            )
        taken = sample_line(
            slopes,
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
    at = tables_of(outer)
    _walk(fan, at, wedge, outer, first_radial, inner, ground, obstacle, mast, link, layers)
