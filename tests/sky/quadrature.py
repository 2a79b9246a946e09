"""Transforms by direct quadrature of the surface brightness, sharing no code with the shapes."""

import numpy as np
from scipy.integrate import quad
from scipy.special import gamma, gammaincinv, j0, k0


def hankel(brightness, k, *, edge, samples=1000):
    """Normalised Hankel transform at k (radians per unit) of a round profile that ends at edge."""
    t, w = np.polynomial.legendre.leggauss(samples)
    # r = edge sin(a): the square root at the edge of a limb-darkened disc becomes smooth.
    a = 0.25 * np.pi * (t + 1.0)
    r, jacobian = edge * np.sin(a), edge * np.cos(a)
    light = brightness(r) * r * jacobian * w
    return (light * j0(np.multiply.outer(k, r))).sum(axis=-1) / light.sum()


def sersic_rotated(k, index):
    """Transform of Sersic's profile (n > 1) with Re = 1 at k, on a contour without oscillation.

    With J0 = Re H0(1) and r = i t the Hankel function becomes K0, and
    F = -4/L Im integral t K0(kt) exp(-b t^(1/n) exp(i pi/2n)) dt.
    """
    b = gammaincinv(2.0 * index, 0.5)
    light = 2.0 * np.pi * index * b ** (-2.0 * index) * gamma(2.0 * index)
    turn = np.exp(0.5j * np.pi / index)

    def integrand(y):
        t = np.exp(y)
        return t * t * k0(k * t) * np.exp(-b * turn * t ** (1.0 / index)).imag

    end = np.log(700.0 / k)
    value, _ = quad(integrand, -40.0, end, epsabs=1e-13 * light, epsrel=1e-11, limit=2000)
    return -4.0 * value / light


def plane(image, x, y, u, v):
    """Normalised transform of an image sampled at x, y: a plain sum at each (u, v)."""
    values = []
    for fu, fv in zip(u, v, strict=True):
        values.append((image * np.exp(-2j * np.pi * (fu * x + fv * y))).sum() / image.sum())
    return np.array(values)
