"""The search for extreme points by bounds gives what a look at every sample gives."""

import math

import numpy as np
import pytest

from planner.physics._lanes import LANES
from planner.sweep.course import new_fan, tables_of
from planner.sweep.extremes import weigh_edges
from planner.sweep.sampling_lines import raise_horizon
from planner.sweep.search import search_extremes, search_obstruction
from planner.sweep.state import (
    BEST_NEAR,
    BEST_TANGENT,
    BLOCK,
    DIRECT,
    GROUND,
    INTERVALS,
    LOWEST,
    OBSTRUCTION,
    OBSTRUCTION_SLOPE,
    RX_BENT,
    SHARE_OF_NEXT,
    STEP_BULGE,
    STEP_DRIFT,
    SURFACE_AT,
    SURFACE_SLOPE,
)

LARGEST = 1600  # samples


def profiles(rng: np.random.Generator, samples: int, roughness_m: float) -> np.ndarray:
    """(samples, LANES) random walks that resemble each other from lane to lane."""
    common = np.cumsum(rng.normal(0.0, roughness_m, samples))
    own = np.cumsum(rng.normal(0.0, 0.1 * roughness_m, (samples, LANES)), axis=0)
    surface = common[:, np.newaxis] + own - 60.0
    for _ in range(samples // 20):  # hills that one lane alone has
        surface[rng.integers(0, samples), rng.integers(0, LANES)] += rng.uniform(0.0, 60.0)
    return surface.astype(np.float32)


def fan_of(surface: np.ndarray, samples: int):
    """A fan that has walked over a surface, its row of narrow numbers by offset, and offsets."""
    fan, at = new_fan(LARGEST, False), tables_of(LARGEST)
    fan.surface[: surface.size] = surface.ravel()
    row = {offset: fan.narrow[offset : offset + LANES] for offset in range(0, fan.narrow.size, 32)}
    row[SURFACE_SLOPE][:] = LOWEST
    for sample in range(samples):
        raise_horizon(fan.narrow, fan.place, fan.surface, fan.lids, at, sample)
    return fan, at, row


@pytest.mark.parametrize(
    ("samples", "roughness_m"), [(7, 2.0), (300, 0.5), (1500, 3.0), (900, 0.0)]
)
def test_bounds_change_no_result(samples, roughness_m):
    """Line after line, as in a walk, with what was recalled from the line before."""
    rng = np.random.default_rng(samples)
    surface = profiles(rng, samples + 8, roughness_m)
    fan, at, row = fan_of(surface, samples)
    slopes = surface[:samples] / np.arange(1.0, samples + 1.0)[:, np.newaxis]
    np.testing.assert_allclose(row[SURFACE_SLOPE], slopes.max(axis=0), rtol=1e-6)
    if roughness_m > 0.0:
        steepest = fan.place[SURFACE_AT : SURFACE_AT + LANES]
        np.testing.assert_array_equal(steepest, slopes.argmax(axis=0))
    for n in range(12):
        steps = samples + 3.2 + 1.1 * n
        share = rng.uniform(0.0, 1.0, LANES).astype(np.float32)
        row[SHARE_OF_NEXT][:] = share
        # Between a radial and the next lies what they have in proportion.
        following = np.roll(surface[:samples], -1, axis=1).astype(float)
        heights = surface[:samples].astype(float) * (1.0 - share) + following * share
        rx = heights[-1] + rng.uniform(-20.0, 40.0, LANES)
        row[RX_BENT][:] = rx
        row[DIRECT][:] = rx / steps
        # Of each three only one lane is wanted: what its neighbour alone shows must be found, too.
        wanted = np.arange(LANES) % 3 == n % 3
        row[BEST_TANGENT][:] = np.where(wanted, LOWEST, np.inf)
        row[BEST_NEAR][:] = np.where(wanted, LOWEST, np.inf)
        search_extremes(
            fan.narrow, fan.surface, fan.lids, fan.tables, fan.recalled, at, samples, steps
        )
        place = np.arange(1.0, samples + 1.0)[:, np.newaxis]
        tangent = (heights - rx.astype(np.float32)) / (steps - place)
        ray = (rx / steps).astype(np.float32) * place
        near = (heights - ray) / np.sqrt(place * (steps - place))
        cells = np.flatnonzero(wanted[:INTERVALS])
        found = row[BEST_TANGENT][cells]
        np.testing.assert_allclose(found, tangent.max(axis=0)[cells], rtol=1e-4, atol=5e-6)
        found = row[BEST_NEAR][cells]
        np.testing.assert_allclose(found, near.max(axis=0)[cells], rtol=1e-4, atol=5e-6)


def test_what_cannot_be_beaten_is_left_alone():
    """A lane that is not wanted starts at infinity and stays there; a floor stays where higher."""
    fan, at, row = fan_of(np.full((40, LANES), -50.0, dtype=np.float32), 40)
    row[BEST_TANGENT][:] = np.inf
    row[BEST_NEAR][:] = -1e-3
    search_extremes(fan.narrow, fan.surface, fan.lids, fan.tables, fan.recalled, at, 40, 43.0)
    assert (row[BEST_TANGENT] == math.inf).all()
    assert (row[BEST_NEAR] == np.float32(-1e-3)).all()


@pytest.mark.parametrize(("samples", "roughness_m"), [(7, 2.0), (300, 0.5), (1500, 3.0)])
def test_the_highest_obstruction_is_found(samples, roughness_m):
    """Bare ground without curvature: the most above the ray, and the steepest from the receiver."""
    rng = np.random.default_rng(samples)
    bent = profiles(rng, samples + 8, roughness_m)
    fan, at, row = fan_of(bent, samples)
    place = np.arange(1.0, samples + 1.0)[:, np.newaxis]
    bulge, drift = 2e-5, 1e-6
    row[STEP_BULGE][:], row[STEP_DRIFT][:] = bulge, drift
    for n in range(12):
        steps = samples + 3.2 + 1.1 * n
        share = rng.uniform(0.0, 1.0, LANES).astype(np.float32)
        row[SHARE_OF_NEXT][:] = share
        following = np.roll(bent[:samples], -1, axis=1).astype(float)
        ground = bent[:samples].astype(float) * (1.0 - share) + following * share
        ground += bulge * place**2 * (1.0 - drift * place)
        rx = rng.uniform(-80.0, 40.0, LANES).astype(np.float32)
        row[GROUND][:] = rx
        row[OBSTRUCTION][:], row[OBSTRUCTION_SLOPE][:] = 0.0, 0.0
        lists = fan.surface, fan.lids, fan.tables, fan.recalled
        search_obstruction(fan.narrow, *lists, at, samples, samples, steps)
        above = ground - rx.astype(float) / steps * place
        cells = slice(0, INTERVALS)
        highest = np.maximum(above.max(axis=0), 0.0)[cells]
        np.testing.assert_allclose(row[OBSTRUCTION][cells], highest, rtol=1e-4, atol=1e-3)
        steepest = np.maximum((above / (steps - place)).max(axis=0), 0.0)[cells]
        np.testing.assert_allclose(row[OBSTRUCTION_SLOPE][cells], steepest, rtol=1e-4, atol=1e-4)


def test_weights_follow_from_line_to_line():
    """Newton's step from the line before gives what the root gives; after a gap anew."""
    fan, at = new_fan(LARGEST, False), tables_of(LARGEST)
    blocks = 96
    edges = np.arange(blocks + 1) * BLOCK + 1.0
    for steps in (1550.3, 1551.4, 1552.5, 1553.6, 1590.0, 1591.1, 1592.2):
        weigh_edges(fan.tables, at, blocks, steps)
        root = np.sqrt(edges * (steps - edges))
        found = fan.tables[at.edge_root : at.edge_root + blocks + 1]
        np.testing.assert_allclose(found, root, rtol=2e-6)
        found = fan.tables[at.edge_inverse : at.edge_inverse + blocks + 1]
        np.testing.assert_allclose(found, 1.0 / root, rtol=2e-6)
