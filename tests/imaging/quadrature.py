"""Images by direct quadrature of the diffraction and turbulence integrals, apart from the engine.

The PSF of an annulus is Born & Wolf's closed form; with air it is the Hankel transform of the
annulus' transfer function (areas of overlapping circles) times Fried's exponential. Pixels are
integrated by Gauss-Legendre quadrature.
"""

import numpy as np
from scipy.integrate import simpson
from scipy.interpolate import CubicSpline
from scipy.special import j0, j1


def airy(r, *, wavelength, diameter, obstruction):
    """PSF per steradian at angles r, Born & Wolf section 8.6.2."""
    v = np.maximum(np.pi * diameter * r / wavelength, 1e-9)
    amplitude = 2 * j1(v) / v
    if obstruction:
        amplitude = amplitude - obstruction**2 * 2 * j1(obstruction * v) / (obstruction * v)
    amplitude = amplitude / (1 - obstruction**2)
    area = np.pi * diameter**2 / 4 * (1 - obstruction**2)
    return amplitude**2 * area / wavelength**2


def _overlap(d, a, b):
    """Common area of two circles of radii a and b at distance d."""
    d = np.asarray(d, float)
    small = min(a, b)
    out = np.zeros_like(d)
    out[d <= abs(a - b)] = np.pi * small**2
    lens = (d > abs(a - b)) & (d < a + b)
    x = d[lens]
    c1 = np.clip((x**2 + a**2 - b**2) / (2 * x * a), -1, 1)
    c2 = np.clip((x**2 + b**2 - a**2) / (2 * x * b), -1, 1)
    root = (-x + a + b) * (x + a - b) * (x - a + b) * (x + a + b)
    out[lens] = a**2 * np.arccos(c1) + b**2 * np.arccos(c2) - 0.5 * np.sqrt(np.maximum(root, 0))
    return out


def annulus_transfer(f, *, wavelength, diameter, obstruction):
    d = wavelength * np.asarray(f, float)
    big, small = diameter / 2, obstruction * diameter / 2
    area = np.pi * (big**2 - small**2)
    value = _overlap(d, big, big)
    if obstruction:
        value = value - 2 * _overlap(d, big, small) + _overlap(d, small, small)
    return value / area


def radial_psf(transfer, band_limit, reach, nodes=20001, places=3000):
    """PSF per steradian as a spline in angle, by Simpson's rule on the Hankel integral."""
    # The substitution f = F t^2 crowds the nodes at the cusp of the origin.
    t = np.linspace(0, 1, nodes)
    f = band_limit * t**2
    weight = transfer(f) * f * 2 * band_limit * t * 2 * np.pi
    r = reach * np.linspace(0, 1, places) ** 1.5
    value = np.array([simpson(weight * j0(2 * np.pi * f * a), x=t) for a in r])
    return CubicSpline(r, value)


def pixel_image(psf, *, x, y, columns, rows, pixel_scale, order):
    """Star of unit light at pixel place (x, y), integrated over square pixels."""
    g, w = np.polynomial.legendre.leggauss(order)
    w = w / 2
    at_x = ((np.arange(columns)[:, None] + g / 2 - x) * pixel_scale).ravel()
    at_y = ((np.arange(rows)[:, None] + g / 2 - y) * pixel_scale).ravel()
    value = psf(np.hypot(at_x[None, :], at_y[:, None]))
    value = value.reshape(rows, order, columns, order)
    return np.einsum("aibj,i,j->ab", value, w, w) * pixel_scale**2
