"""Colours: classes from the threshold upwards, neighbours apart."""

from itertools import pairwise

import numpy as np

from planner.handout.colours import SECTOR_HUES, SIGNAL_RAMP, rgb, sector_colours, signal_classes


def test_neighbouring_sectors_never_share_a_hue_while_six_suffice():
    """Eight sectors in a row of stripes: no two that touch have one hue."""
    stripes = np.repeat(np.arange(1, 9, dtype=np.int16), 5)[np.newaxis, :].repeat(10, axis=0)
    # In an order in which taking the hues in turn would put one hue side by side.
    order = np.array([0, 1, 7, 2, 8, 3, 4, 5, 6], dtype=np.int16)
    server = order[stripes]
    colours = sector_colours(server, 8)
    assert len(set(colours)) == len(SECTOR_HUES)
    row = server[0]
    for left, right in pairwise(row):
        assert left == right or colours[left - 1] != colours[right - 1]


def test_up_to_six_sectors_have_six_hues():
    """In the order of the palette, whatever the map looks like."""
    assert sector_colours(np.full((4, 4), -1, dtype=np.int16), 6) == SECTOR_HUES


def test_signal_classes_rise_from_the_threshold_in_steps_of_five():
    """Lower limits follow each other, the last is open, the ramp runs from pale to deep."""
    classes = signal_classes(-75.0, -52.0)
    assert [lower for lower, _, _ in classes] == [-75.0, -70.0, -65.0, -60.0, -55.0]
    assert [upper for _, upper, _ in classes] == [-70.0, -65.0, -60.0, -55.0, float("inf")]
    assert (classes[0][2], classes[-1][2]) == (SIGNAL_RAMP[0], SIGNAL_RAMP[-1])
    assert len(signal_classes(-75.0, 20.0)) == len(SIGNAL_RAMP)
    assert len(signal_classes(-75.0, -80.0)) == 1


def test_rgb():
    """#rrggbb as three numbers."""
    assert rgb("#0072b2") == (0, 114, 178)
