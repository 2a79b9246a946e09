"""From the camera of a scene to what the chain must know of it. SI inside; electrons and counts."""

from __future__ import annotations

from simimg.assembly.brightness import exposure_time
from simimg.camera.settings import CameraSettings, CosmicRays, Patterns, Readout, Shutter, Window
from simimg.scene.camera import Camera
from simimg.scene.model import Scene


def camera_settings(scene: Scene) -> CameraSettings:
    """The camera and the exposure of a scene, for the chain.

    Parameters
    ----------
    scene : Scene
        With a camera.
    """
    assert scene.camera is not None
    return detector_settings(scene.camera, time=exposure_time(scene))


def detector_settings(camera: Camera, *, time: float) -> CameraSettings:
    """A camera in an exposure of so many seconds, for the chain."""
    return CameraSettings(
        time=time,
        gain=camera.gain,
        read_noise=camera.read_noise,
        dark_current=camera.dark_current,
        bias=camera.bias,
        full_well=camera.full_well,
        bleeding=camera.bleeding,
        bit_depth=camera.bit_depth,
        serial=camera.serial,
        patterns=_patterns(camera),
        cosmic_rays=_cosmic_rays(camera),
        shutter=None
        if camera.shutter is None
        else Shutter(kind=camera.shutter.kind, travel=camera.shutter.travel),
        readout=_readout(camera),
        window=_window(camera),
    )


def _window(camera: Camera) -> Window | None:
    if camera.sub_frame is None or camera.pixels is None:
        return None
    x, y, columns, rows = camera.sub_frame
    whole = camera.pixels[::-1]
    return Window(shape=whole, rows=slice(y, y + rows), columns=slice(x, x + columns))


def _patterns(camera: Camera) -> Patterns:
    return Patterns(
        flat_rms=camera.flat_rms,
        vignetting=camera.vignetting,
        dust_rings=camera.dust_rings,
        dark_rms=camera.dark_rms,
        hot_fraction=camera.hot_pixel_fraction,
        hot_current=camera.hot_pixel_current,
        flickering_fraction=camera.flickering_pixel_fraction,
        flicker_current=camera.flicker_current,
        dead_fraction=camera.dead_pixel_fraction,
        bad_columns=camera.bad_columns,
    )


def _cosmic_rays(camera: Camera) -> CosmicRays | None:
    if not camera.cosmic_ray_rate or camera.pixel_size is None:
        return None
    return CosmicRays(
        rate=camera.cosmic_ray_rate,
        pixel_size=camera.pixel_size,
        thickness=camera.detector_thickness,
    )


def _readout(camera: Camera) -> Readout:
    return Readout(
        inefficiency=camera.transfer_inefficiency,
        trail_length=camera.trail_length,
        binning=camera.binning,
        em_gain=camera.em_gain,
        em_well=camera.em_full_well,
        coupling=camera.pixel_coupling,
        noise_spread=camera.read_noise_spread,
        nonlinearity=camera.nonlinearity,
        gains=camera.amplifier_gains,
        biases=camera.amplifier_biases,
        crosstalk=camera.crosstalk,
        bias_rms=camera.bias_rms,
        bias_drift=camera.bias_drift,
        prescan=camera.prescan,
        overscan=camera.overscan,
    )
