"""A measured PSF from a file, as a transfer function in place of optics, air and pixel.

The image holds the share of a star's light on a detector pixel centred at each sample, so that the
pixel's response is in it already. Its transfer function is its Fourier sum, without anything beyond
the samples' own Nyquist frequency. Radians and cycles per radian.
"""

from __future__ import annotations

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.errors import InputError, mistake
from simimg.imaging.basis import Transfer, WingLaw
from simimg.optics.tabulate import MOST_STEPS, tabulated_transfer
from simimg.scene.model import Scene
from simimg.sky.pictures import read_map

_LARGEST = 1025


def measured_transfer(scene: Scene) -> Transfer:
    """The transfer function of a scene's [psf] file.

    Raises
    ------
    InputError
        A file that is no PSF, or a scene without a pixel scale.
    """
    assert scene.psf is not None
    source, scale = scene.inputs[scene.psf.file], scene.pixel_scale
    image = read_map(source.read(), source.name)
    oversampling = scene.psf.oversampling or _stated_oversampling(source.read()) or 1.0

    def wrong(what: str, mend: str) -> InputError:
        return InputError(mistake(scene.name, "psf.file", f"{source.name}: {what}", mend))

    if scale is None:
        raise wrong("a measured PSF needs a pixel scale", "add camera.pixel_scale")
    if max(image.shape) > _LARGEST:
        raise wrong(f"is larger than {_LARGEST} samples a side", "cut out its middle")
    total = float(image.sum())
    if not (np.isfinite(image).all() and total > 0.0):
        raise wrong("holds no light, or values that are not finite", "give a PSF above 0")
    step = scale / oversampling
    rows, columns = image.shape
    x = (np.arange(columns) - (columns - 1) / 2.0) * step
    y = (np.arange(rows) - (rows - 1) / 2.0) * step
    share = image / total

    def exact(u: FloatArray, v: FloatArray) -> AnyArray:
        across = np.exp(-2j * np.pi * np.outer(u.ravel(), x))
        along = np.exp(-2j * np.pi * np.outer(v.ravel(), y))
        return np.asarray(along @ share @ across.T)

    limit = 0.5 / step
    side = max(rows, columns) * step
    table = tabulated_transfer(exact, limit=limit, step=max(0.05 / side, limit / MOST_STEPS))
    return Transfer(limit, planar=(table,), even=False, wings=WingLaw(core=0.75 * side))


def _stated_oversampling(content: bytes) -> float | None:
    """OVERSAMP of the first image's header."""
    import io

    from astropy.io import fits

    with fits.open(io.BytesIO(content), memmap=False) as hdus:
        for hdu in hdus:
            value = hdu.header.get("OVERSAMP")
            if isinstance(value, int | float) and 1.0 <= value <= 100.0:
                return float(value)
    return None
