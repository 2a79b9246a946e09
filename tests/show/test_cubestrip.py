"""Frames of a cube side by side: which, and where."""

import numpy as np

from simimg.cube import Cube
from simimg.show.cubestrip import cube_strip


def cube(count):
    every = 100 * np.arange(count, dtype=np.uint16)[:, None, None] + np.arange(6, dtype=np.uint16)
    return Cube(planes=np.broadcast_to(every, (count, 4, 6)).copy(), header={"OBJECT": "moving"})


def test_six_frames_in_the_order_of_time():
    made = cube(12)
    shown = cube_strip(made)
    assert shown.counts.shape == (8, 18)
    assert shown.value("OBJECT") == "moving"
    # Row 0 is at the bottom: the earlier frames are in the upper rows.
    np.testing.assert_array_equal(shown.counts[::4, ::6], [[600, 800, 1000], [0, 200, 400]])
    np.testing.assert_array_equal(shown.counts[4:, 6:12], made.planes[2])


def test_few_frames_and_rows_that_are_not_full():
    assert cube_strip(cube(1)).counts.shape == (4, 6)
    assert cube_strip(cube(2)).counts.shape == (4, 12)
    counts = cube_strip(cube(5), 4).counts
    np.testing.assert_array_equal(counts[4:, ::6], [[0, 100, 200]] * 4)
    np.testing.assert_array_equal(counts[:4, 0], 300)
    assert (counts[:4, 6:] == 0).all()
