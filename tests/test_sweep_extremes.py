"""The search for extreme points by bounds gives what a look at every sample gives."""

import math

import numpy as np
import pytest

from planner.sweep.extremes import search
from planner.sweep.sampling_lines import raise_horizon
from planner.sweep.state import (
    BEST_NEAR,
    BEST_TANGENT,
    BLOCK,
    DIRECT,
    GROUP,
    LANES,
    NARROW_ROWS,
    RECALLED,
    REGION,
    RX_BENT,
    SURFACE_SLOPE,
)


def profiles(rng: np.random.Generator, samples: int, roughness_m: float) -> np.ndarray:
    """(samples, LANES) random walks that resemble each other from lane to lane."""
    common = np.cumsum(rng.normal(0.0, roughness_m, samples))
    own = np.cumsum(rng.normal(0.0, 0.1 * roughness_m, (samples, LANES)), axis=0)
    return (common[:, np.newaxis] + own - 60.0).astype(np.float32)


@pytest.mark.parametrize(
    ("samples", "roughness_m"), [(7, 2.0), (300, 0.5), (1500, 3.0), (900, 0.0)]
)
def test_bounds_change_no_result(samples, roughness_m):
    """Line after line, as in a walk, with what was recalled from the line before."""
    rng = np.random.default_rng(samples)
    surface = profiles(rng, samples + 8, roughness_m)
    blocks = samples // BLOCK + 2
    narrow = np.zeros(NARROW_ROWS * LANES, dtype=np.float32)
    narrow[SURFACE_SLOPE : SURFACE_SLOPE + LANES] = -np.inf
    lids = [np.zeros((2 * (blocks // n + 1), LANES), dtype=np.float32) for n in (1, GROUP, REGION)]
    for sample in range(samples):
        raise_horizon(narrow, surface, *lids, LANES, sample)
    slopes = surface[:samples] / np.arange(1.0, samples + 1.0)[:, np.newaxis]
    np.testing.assert_allclose(
        narrow[SURFACE_SLOPE : SURFACE_SLOPE + LANES], slopes.max(axis=0), rtol=1e-6
    )
    root = (1.0 / np.sqrt(np.arange(1.0, surface.shape[0] + 1.0))).astype(np.float32)
    recalled = np.zeros(1 + 2 * RECALLED, dtype=np.int64)
    edges = np.zeros(blocks, dtype=np.float32), np.zeros(blocks, dtype=np.float32)
    rows = np.zeros(BLOCK, dtype=np.float32), np.zeros(BLOCK, dtype=np.float32)
    for n in range(12):
        steps = samples + 3.2 + 1.1 * n
        rx = surface[samples - 1] + rng.uniform(-20.0, 40.0, LANES)
        narrow[RX_BENT : RX_BENT + LANES] = rx
        narrow[DIRECT : DIRECT + LANES] = rx / steps
        narrow[BEST_TANGENT : BEST_TANGENT + LANES] = -np.inf
        narrow[BEST_NEAR : BEST_NEAR + LANES] = -np.inf
        search(
            narrow,
            surface,
            surface.ravel(),
            *lids,
            *edges,
            root,
            *rows,
            recalled,
            LANES,
            samples,
            steps,
        )
        place = np.arange(1.0, samples + 1.0)[:, np.newaxis]
        heights = surface[:samples].astype(float)
        tangent = (heights - rx.astype(np.float32)) / (steps - place)
        ray = (rx / steps).astype(np.float32) * place
        near = (heights - ray) / np.sqrt(place * (steps - place))
        found = narrow[BEST_TANGENT : BEST_TANGENT + LANES]
        np.testing.assert_allclose(found, tangent.max(axis=0), rtol=1e-4, atol=2e-6)
        found = narrow[BEST_NEAR : BEST_NEAR + LANES]
        np.testing.assert_allclose(found, near.max(axis=0), rtol=1e-4, atol=2e-6)


def test_what_cannot_be_beaten_is_left_alone():
    """A lane that is not wanted starts at infinity and stays there; a floor stays where higher."""
    surface = np.full((40, LANES), -50.0, dtype=np.float32)
    narrow = np.zeros(NARROW_ROWS * LANES, dtype=np.float32)
    lids = [np.full((8, LANES), -50.0, dtype=np.float32) for _ in range(3)]
    edges = np.zeros(5, dtype=np.float32), np.zeros(5, dtype=np.float32)
    rows = np.zeros(BLOCK, dtype=np.float32), np.zeros(BLOCK, dtype=np.float32)
    root = (1.0 / np.sqrt(np.arange(1.0, 41.0))).astype(np.float32)
    narrow[BEST_TANGENT : BEST_TANGENT + LANES] = np.inf
    narrow[BEST_NEAR : BEST_NEAR + LANES] = -1e-3
    recalled = np.zeros(1 + 2 * RECALLED, dtype=np.int64)
    search(narrow, surface, surface.ravel(), *lids, *edges, root, *rows, recalled, LANES, 40, 43.0)
    assert (narrow[BEST_TANGENT : BEST_TANGENT + LANES] == math.inf).all()
    assert (narrow[BEST_NEAR : BEST_NEAR + LANES] == np.float32(-1e-3)).all()
