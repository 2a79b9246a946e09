"""Each effect by itself: what it does to exact values."""

import numpy as np
import pytest
from numpy.testing import assert_array_equal

from simimg.camera.converter import converter_top, counts_type, digitise
from simimg.camera.dark import dark_signal
from simimg.camera.masks import MASK_BITS
from simimg.camera.poisson import arrivals
from simimg.camera.readout import add_read_noise
from simimg.camera.streams import Stage, stream
from simimg.camera.well import fill_well


def test_dark_signal():
    assert dark_signal(0.02, 30.0) == 0.6


def test_arrivals_are_whole_and_zero_without_light():
    mean = np.array([[0.0, 3.7, 1e6]])
    out = np.empty((1, 3), np.float32)
    arrivals(mean, np.random.default_rng(1), out=out)
    assert out[0, 0] == 0.0
    assert_array_equal(out, np.round(out))


def test_full_well():
    electrons = np.array([1.0, 9.99, 10.0, 11.0])
    assert fill_well(electrons, 10.0).tolist() == [False, False, True, True]
    assert electrons.tolist() == [1.0, 9.99, 10.0, 10.0]


def test_no_read_noise_draws_nothing():
    rng = np.random.default_rng(1)
    electrons = np.ones(3)
    add_read_noise(electrons, 0.0, rng)
    assert electrons.tolist() == [1.0, 1.0, 1.0]
    assert rng.random() == np.random.default_rng(1).random()


def test_converter_rounds_halves_to_even_and_cuts():
    level = np.array([-3.0, 0.5, 1.5, 1.51, 254.6, 300.0])
    out = np.empty(6, np.uint16)
    top = digitise(level, 8, out=out)
    assert out.tolist() == [0, 0, 2, 2, 255, 255]
    assert top.tolist() == [False] * 4 + [True] * 2


@pytest.mark.parametrize(
    ("bits", "top", "kind"),
    [
        (8, 255, np.uint16),
        (16, 65535, np.uint16),
        (17, 131071, np.int32),
        (31, 2**31 - 1, np.int32),
    ],
)
def test_converter_range(bits, top, kind):
    assert converter_top(bits) == top <= np.iinfo(kind).max
    assert counts_type(bits) is kind


def test_mask_bits_are_single_and_apart():
    assert all(bit.bit_count() == 1 and bit < 256 for bit in MASK_BITS)
    assert len(MASK_BITS) == 7


def test_streams_depend_on_every_part_of_their_name():
    names = [
        (seed, frame, stage, block)
        for seed in (0, 1)
        for frame in (0, 1)
        for stage in Stage
        for block in (0, 1)
    ]
    draws = {
        stream(seed, frame=frame, stage=stage, block=block).integers(2**62)
        for seed, frame, stage, block in names
    }
    assert len(draws) == len(names)
    again = stream(1, frame=1, stage=Stage.PHOTONS, block=1).integers(2**62)
    assert again in draws


def test_a_stream_keeps_its_draws():
    # What a seed means must not change from version to version: numpy's own SeedSequence and PCG64
    # spelled out.
    sequence = np.random.SeedSequence(7, spawn_key=(2, 1, 3))
    expected = np.random.Generator(np.random.PCG64(sequence)).integers(2**62, size=3)
    got = stream(7, frame=2, stage=Stage.PHOTONS, block=3).integers(2**62, size=3)
    assert_array_equal(got, expected)
    assert (Stage.PHOTONS, Stage.READ_NOISE) == (1, 2)


def test_streams_refuse_negative_numbers():
    with pytest.raises(ValueError, match="must not be negative"):
        stream(0, frame=0, stage=Stage.PHOTONS, block=-1)
