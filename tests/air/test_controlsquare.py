"""Integrals over the square of control: areas, moments, and that finer rules change nothing."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.air import controlsquare
from simimg.air.controlsquare import ControlSquare, StructureTable
from simimg.air.correction import CorrectedAir
from simimg.air.layers import Layer
from simimg.air.residual import Loop, Turbulence

LAYERS = (Layer(0.0, 0.5, 8.0, 0.3), Layer(4000.0, 0.3, 15.0, 1.0), Layer(11000.0, 0.2, 30.0, 2.0))


def test_the_nodes_measure_the_square():
    fx, fy, weight = ControlSquare(3.0, 2.0).nodes()
    assert_allclose(weight.sum(), 36.0, rtol=1e-12)
    assert_allclose((weight * fx**2).sum(), 36.0 * 3.0, rtol=1e-12)
    assert_allclose((weight * fy**4).sum(), 36.0 * 81.0 / 5.0, rtol=1e-12)
    assert (np.maximum(np.abs(fx), np.abs(fy)) < 3.0).all()


def test_an_even_spectrum_has_a_closed_form():
    """Twice the area less twice the transform of the square, a product of sincs."""
    square = ControlSquare(3.0, 2.1)
    table = StructureTable(lambda fx, fy: np.ones(np.broadcast_shapes(fx.shape, fy.shape)),
                           square, longest=2.1)  # fmt: skip
    sx, sy = np.array([0.0, 0.1, 0.77, -2.0, 1.3]), np.array([0.0, -0.3, 0.5, 0.1, -2.0])
    expected = 72.0 * (1.0 - np.sinc(6.0 * sx) * np.sinc(6.0 * sy))
    assert_allclose(table(sx, sy), expected, atol=1e-5)


@pytest.mark.parametrize(("count", "offset"), [(6, 0.0), (16, 1e-5), (12, 1e-4)])
def test_finer_rules_change_nothing(monkeypatch, count, offset):
    """Below 5e-6 rad2, that is 2.5e-6 of the transfer function."""
    r, angle = np.linspace(0.0, 1.99, 50), np.linspace(0.0, 6.0, 50)

    def found():
        loop = Loop(
            diameter=2.0, pitch=2.0 / count, lag=0.003, noise=0.05, offset=(offset, offset / 3.0)
        )
        made = CorrectedAir(Turbulence(0.15, 25.0, LAYERS), loop, 550e-9)
        return made.structure(r * np.cos(angle), r * np.sin(angle))

    usual = found()
    for name, value in (("_PER_CYCLE", 6.0), ("_LEAST", 80), ("_SMOOTH", 140), ("_FINE", 32)):
        monkeypatch.setattr(controlsquare, name, value)
    assert_allclose(usual, found(), rtol=0, atol=5e-6)
