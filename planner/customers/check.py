"""Check a customer list: the best sector for each place by the exact path and the exact pattern.

One path is computed for each pair of a customer and a (tower, antenna height, frequency) within
the radius; sectors that share these share the path, as they share a path field. What decides
between sectors is the rule of the coverage layers, so that a row and the map's pixel agree.
"""

import math
from collections.abc import Callable, Mapping, Sequence

import numpy as np

from planner.antenna import Pattern
from planner.customers.answer import CustomerAnswer
from planner.customers.links import (
    Link,
    PathKey,
    best_and_second,
    gains_and_signals,
    link_of,
    path_key,
)
from planner.customers.reasons import (
    Reasons,
    id_notes,
    joined,
    left_out_note,
    no_path_reason,
    not_served_reason,
    out_of_radius_reason,
    rows_text,
    swapped_reason,
)
from planner.customers.surroundings import Surroundings, seems_swapped, surroundings
from planner.errors import CustomersError, Problem
from planner.geodesy import point_at
from planner.network import Customer, Sector, Terminal, Tower
from planner.physics.diffraction import Polarization
from planner.sweep import path_between
from planner.terrain import Terrain

Progress = Callable[[int, int], None]  # done, total


def check_customers(
    terrain: Terrain,
    towers: Sequence[Tower],
    patterns: Mapping[str, Pattern],
    terminal: Terminal,
    customers: Sequence[Customer],
    *,
    radius_m: float,
    k_factor: float,
    polarization: Polarization,
    obstacle_clearing_m: float = 0.0,
    progress: Progress | None = None,
) -> tuple[CustomerAnswer, ...]:
    """One answer for each customer, in the order of the list.

    Parameters
    ----------
    terrain : Terrain
        The surface.
    towers : sequence of Tower
        With the sectors that are on, in the order of the plan.
    patterns : mapping of sector id to Pattern
    terminal : Terminal
        What stands at a house; its height counts where the list gives none.
    customers : sequence of Customer
    radius_m : float
        Up to this true distance from a tower, inclusive, paths are computed. [m]
    k_factor : float
        Effective earth radius factor. [unitless]
    polarization : "vertical" or "horizontal"
    obstacle_clearing_m : float
        Obstacles nearer than this to either end of a path do not count. [m]
    progress : callable(done, total), optional
        Called before the first customer and after each; an exception from it ends the check.

    Returns
    -------
    tuple of CustomerAnswer
        A row whose ``trouble`` is set, which is out of range or whose paths cannot be computed has
        the verdict "not computed" and a reason.

    Raises
    ------
    CustomersError
        Every row that could be computed lies out of range as it is given and in range with
        latitude and longitude swapped.

    Notes
    -----
    Best is the strongest among the sectors that reach their own radio's service threshold; where
    none does, the strongest of all. ``server_margin_db`` takes the terminal as equally sensitive
    in all directions.
    """
    towers = tuple(tower for tower in towers if tower.sectors)
    around = surroundings(towers, customers)
    _refuse_swapped_list(customers, around, radius_m)

    def paths(customer: Customer, near: Sequence[int]) -> tuple[dict[PathKey, Link], Reasons]:
        """Paths from the towers in range, and for each tower without one the reason."""
        own_links: dict[PathKey, Link] = {}
        reasons: Reasons = {}
        for index in near:
            tower = towers[index]
            for key in dict.fromkeys(path_key(index, sector) for sector in tower.sectors):
                path = path_between(
                    terrain,
                    a_latitude=tower.latitude,
                    a_longitude=tower.longitude,
                    a_height_m=key[1],
                    b_latitude=customer.latitude,
                    b_longitude=customer.longitude,
                    b_height_m=_antenna_height_m(customer, terminal),
                    frequency_mhz=key[2],
                    k_factor=k_factor,
                    polarization=polarization,
                    obstacle_clearing_m=obstacle_clearing_m,
                )
                if path.reason:
                    reasons[tower.id] = path.reason
                else:
                    own_links[key] = link_of(path)
        return own_links, reasons

    links: list[dict[PathKey, Link]] = []
    missing: list[Reasons] = []
    if progress is not None:
        progress(0, len(customers))
    for number, customer in enumerate(customers):
        near = np.flatnonzero(around.distance_m[number] <= radius_m)
        near = near[np.argsort(around.distance_m[number, near], kind="stable")]
        if near.size and _place_trouble(terrain, customer):
            near = near[:0]
        own_links, reasons = paths(customer, near.tolist())
        links.append(own_links)
        missing.append(reasons)
        if progress is not None:
            progress(number + 1, len(customers))

    sectors = [(index, sector) for index, tower in enumerate(towers) for sector in tower.sectors]
    gain_dbi, signal_dbm = gains_and_signals(sectors, patterns, terminal, links)
    notes = id_notes(customers)
    answers = []
    for number, customer in enumerate(customers):
        if not links[number]:
            reason = _why_not_computed(
                terrain, towers, customer, around, number, radius_m, missing[number]
            )
            answers.append(
                _not_computed(customer, towers, around, number, reason=reason, note=notes[number])
            )
            continue
        best, second = best_and_second(sectors, signal_dbm[number])
        index, sector = sectors[best]
        answers.append(
            _computed(
                customer,
                towers[index].id,
                sector,
                links[number][path_key(index, sector)],
                antenna_height_m=_antenna_height_m(customer, terminal),
                gain_dbi=float(gain_dbi[number, best]),
                peak_gain_dbi=patterns[sector.id].gain_dbi,
                signal_dbm=float(signal_dbm[number, best]),
                second_sector_id="" if second is None else sectors[second][1].id,
                second_signal_dbm=math.nan if second is None else float(signal_dbm[number, second]),
                note=joined(notes[number], left_out_note(missing[number])),
            )
        )
    return tuple(answers)


def _antenna_height_m(customer: Customer, terminal: Terminal) -> float:
    if customer.antenna_height_m is not None:
        return customer.antenna_height_m
    return terminal.antenna_height_m


def _refuse_swapped_list(
    customers: Sequence[Customer], around: Surroundings, radius_m: float
) -> None:
    if around.distance_m.shape[1] == 0:
        return
    usable = [number for number, customer in enumerate(customers) if not customer.trouble]
    if not usable or not all(seems_swapped(around, number, radius_m) for number in usable):
        return
    rows = rows_text([customers[number].row for number in usable])
    raise CustomersError(
        Problem(
            where=f"customer list, {rows}",
            found="places that are in range of a tower only with latitude and longitude swapped",
            allowed="latitude (-90 to 90) and longitude (-180 to 180) each in its own column",
            advice="Swap the names of the two columns in the first line",
        )
    )


def _place_trouble(terrain: Terrain, customer: Customer) -> str:
    """Why the terrain has no height at the customer; empty where it has one."""
    grid = terrain.grid
    row, col = grid.row_col(*grid.from_geographic(customer.latitude, customer.longitude))
    if not bool(grid.contains(row, col)):
        return "the place lies outside the terrain data"
    if math.isnan(float(terrain.ground_at(row, col))):
        return "the terrain data has a hole at this place"
    return ""


def _computed(
    customer: Customer,
    tower_id: str,
    sector: Sector,
    link: Link,
    *,
    antenna_height_m: float,
    gain_dbi: float,
    peak_gain_dbi: float,
    signal_dbm: float,
    second_sector_id: str,
    second_signal_dbm: float,
    note: str,
) -> CustomerAnswer:
    threshold_dbm = sector.radio.service_threshold_dbm
    served = signal_dbm >= threshold_dbm
    reason = ""
    if not served:
        reason = not_served_reason(
            fade_margin_db=signal_dbm - threshold_dbm,
            threshold_dbm=threshold_dbm,
            distance_m=link.distance_m,
            line_of_sight=link.line_of_sight,
            blocking_distance_m=link.blocking_distance_m,
            blocking_excess_m=link.blocking_excess_m,
            diffraction_loss_db=link.diffraction_loss_db,
            gain_below_peak_db=peak_gain_dbi - gain_dbi,
        )
    blocking_latitude, blocking_longitude = math.nan, math.nan
    if not link.line_of_sight:
        blocking_latitude, blocking_longitude = (
            float(value)
            for value in point_at(
                customer.latitude,
                customer.longitude,
                link.back_azimuth_deg,
                link.blocking_distance_m,
            )
        )
    return CustomerAnswer(
        customer=customer,
        verdict="served" if served else "not served",
        reason=reason,
        note=note,
        antenna_height_m=antenna_height_m,
        tower_id=tower_id,
        sector_id=sector.id,
        distance_m=link.distance_m,
        bearing_to_tower_deg=link.back_azimuth_deg,
        elevation_angle_deg=link.back_elevation_angle_deg,
        received_signal_dbm=signal_dbm,
        fade_margin_db=signal_dbm - threshold_dbm,
        second_sector_id=second_sector_id,
        server_margin_db=signal_dbm - second_signal_dbm,
        sector_gain_dbi=gain_dbi,
        line_of_sight=link.line_of_sight,
        blocking_distance_m=link.blocking_distance_m,
        blocking_latitude=blocking_latitude,
        blocking_longitude=blocking_longitude,
        blocking_excess_m=link.blocking_excess_m,
        blocking_ground_m=link.blocking_ground_m,
        blocking_obstacle_m=link.blocking_obstacle_m,
        path_loss_db=link.path_loss_db,
        free_space_loss_db=link.free_space_loss_db,
        diffraction_loss_db=link.diffraction_loss_db,
    )


def _why_not_computed(
    terrain: Terrain,
    towers: Sequence[Tower],
    customer: Customer,
    around: Surroundings,
    number: int,
    radius_m: float,
    missing: Reasons,
) -> str:
    if customer.trouble:
        return customer.trouble
    if not towers:
        return "the plan has no sector that is switched on"
    nearest = int(np.argmin(around.distance_m[number]))
    distance_m = float(around.distance_m[number, nearest])
    if seems_swapped(around, number, radius_m):
        swapped = int(np.nanargmin(around.swapped_distance_m[number]))
        return swapped_reason(
            towers[nearest].id,
            distance_m,
            towers[swapped].id,
            float(around.swapped_distance_m[number, swapped]),
        )
    if distance_m > radius_m:
        return out_of_radius_reason(towers[nearest].id, distance_m, radius_m)
    return _place_trouble(terrain, customer) or no_path_reason(missing)


def _not_computed(
    customer: Customer,
    towers: Sequence[Tower],
    around: Surroundings,
    number: int,
    *,
    reason: str,
    note: str,
) -> CustomerAnswer:
    """The answer for a row without a path; with the nearest tower where the place is known."""
    if customer.trouble or not towers:
        return CustomerAnswer(customer=customer, verdict="not computed", reason=reason, note=note)
    nearest = int(np.argmin(around.distance_m[number]))
    return CustomerAnswer(
        customer=customer,
        verdict="not computed",
        reason=reason,
        note=note,
        tower_id=towers[nearest].id,
        distance_m=float(around.distance_m[number, nearest]),
        bearing_to_tower_deg=float(around.bearing_to_tower_deg[number, nearest]),
    )
