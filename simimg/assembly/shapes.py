"""The shapes of a scene's extended objects, built in the detector's axes. Radians."""

from __future__ import annotations

from math import pi

from simimg.assembly.places import FieldGeometry
from simimg.errors import InputError, mistake
from simimg.imaging.sources import SkyShape
from simimg.scene.model import Scene
from simimg.scene.objects import Disc, Galaxy, Picture, Placed, Ring
from simimg.sky.disc import DiscShape
from simimg.sky.mosaic import PictureShape
from simimg.sky.phase import PhaseDiscShape
from simimg.sky.pictures import read_picture
from simimg.sky.ring import RingShape
from simimg.sky.sersic import SersicShape


def sky_shape(scene: Scene, key: str, one: Placed, geometry: FieldGeometry) -> SkyShape | None:
    """The shape of an object in the detector's axes; None for a star."""
    if isinstance(one, Galaxy):
        angle = geometry.direction(one.position_angle)
        return SersicShape(one.effective_radius, one.sersic_index, one.axis_ratio, angle)
    if isinstance(one, Disc):
        angle = geometry.direction(one.position_angle)
        if one.phase_angle == 0.0:
            return DiscShape(one.diameter, one.limb_darkening, one.axis_ratio, angle)
        return PhaseDiscShape(
            one.diameter, one.limb_darkening, one.phase_angle, one.axis_ratio, angle
        )
    if isinstance(one, Ring):
        angle = geometry.direction(one.position_angle)
        return RingShape(one.inner_diameter, one.outer_diameter, one.inclination, angle)
    if isinstance(one, Picture):
        source = scene.inputs[one.file]
        values = read_picture(source.read(), source.name)
        up = geometry.direction(one.position_angle)
        try:
            return PictureShape(
                values, one.width / values.shape[1], up - pi / 2.0, geometry.mirrored
            )
        except ValueError as error:
            line = mistake(
                scene.name,
                f"{key}.file",
                f"{source.name}: {error}",
                "give a picture with some light",
            )
            raise InputError(line) from error
    return None
