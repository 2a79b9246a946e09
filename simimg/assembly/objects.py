"""What is up there, counted out: every object of a scene with its place and its electrons.

The inventory holds one row an object (a pair is two) in the order of the scene, its catalogues'
stars last, as arrays, so that a million stars cost no more than they must; and the same objects
as the engine's sources.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from math import cos, pi, sin
from typing import Any

import numpy as np

from simimg.arrays import AnyArray, FloatArray
from simimg.assembly.basis import FOLLOWED
from simimg.assembly.brightness import Photometry, photometry
from simimg.assembly.catalogues import catalogue_rows
from simimg.assembly.colours import colour_keys
from simimg.assembly.dither import pointing_turn
from simimg.assembly.motion import field_turn, moved_points, object_trail
from simimg.assembly.orbits import pair_place
from simimg.assembly.places import FieldGeometry, field_geometry, object_place
from simimg.assembly.shapes import sky_shape
from simimg.assembly.train import Train, assemble_train
from simimg.imaging.sources import PlacedShape, Points, SkyShape, Sources
from simimg.scene.model import Scene
from simimg.scene.objects import Luminous, Pair

SHAPE_KEYS = (
    "sersic_index",
    "effective_radius",
    "axis_ratio",
    "diameter",
    "limb_darkening",
    "phase_angle",
    "inner_diameter",
    "outer_diameter",
    "inclination",
    "width",
    "position_angle",
)


@dataclass(frozen=True)
class Entry:
    """One row of the inventory.

    Attributes
    ----------
    label, kind : str
    x, y : float
        Place in pixels.
    electrons : float
        Of one exposure, over the whole PSF.
    magnitude : float
        NaN where the brightness was given in electrons.
    separation, position_angle : float
        Of a pair's second star about its first (rad); NaN otherwise.
    partner : int
        Row of the other star of a pair; -1 otherwise.
    keys : dict
        Keys of the shape, SI.
    catalogue : bool
        True for a star of a catalogue.
    shape : SkyShape or None
        None for points.
    """

    label: str
    kind: str
    x: float
    y: float
    electrons: float
    magnitude: float
    separation: float
    position_angle: float
    partner: int
    keys: dict[str, float]
    catalogue: bool
    shape: SkyShape | None


@dataclass(frozen=True, eq=False)
class Inventory:
    """Every object of a scene, as columns of one length, and as sources for the engine.

    `colour` is the kind of source for the engine, `trails` (rad) the motion of those written in the
    scene, `turn` (rad) that of the field; the rest is as in `Entry`.
    """

    label: AnyArray
    kind: AnyArray
    x: FloatArray
    y: FloatArray
    electrons: FloatArray
    magnitude: FloatArray
    separation: FloatArray
    position_angle: FloatArray
    partner: AnyArray
    keys: tuple[dict[str, float], ...]
    shapes: tuple[SkyShape | None, ...]
    geometry: FieldGeometry
    colour: AnyArray
    trails: FloatArray
    turn: float
    train: Train
    where: str

    def __len__(self) -> int:
        return int(self.x.size)

    @property
    def written(self) -> int:
        """Rows that stand in the scene itself; those of catalogues follow."""
        return len(self.keys)

    @property
    def points(self) -> Points:
        """All objects as points, in the order of the rows, where they are at mid-exposure."""
        return Points(self.x, self.y, self.electrons, self.colour)

    @property
    def sources(self) -> Sources:
        """The same objects for the engine; what moves is drawn out."""
        point = np.ones(len(self), dtype=bool)
        shapes: list[PlacedShape] = []
        for row, shape in enumerate(self.shapes):
            if shape is not None:
                point[row] = False
                places = self.drawn(np.array([row]))
                shapes += [
                    PlacedShape(float(x), float(y), float(light), shape, int(kind))
                    for x, y, light, kind in zip(
                        places.x, places.y, places.electrons, places.kind, strict=True
                    )
                ]
        return Sources(self.drawn(np.flatnonzero(point)), tuple(shapes))

    def drawn(self, rows: AnyArray) -> Points:
        """The points of some rows (their numbers); what moves is drawn out."""
        trails = np.zeros((rows.size, 2))
        own = rows < self.written
        trails[own] = self.trails[rows[own]]
        return moved_points(
            self.points.chosen(rows),
            trails=trails,
            turn=self.turn,
            finest=self.train.basis.members[0],
            geometry=self.geometry,
            where=self.where,
        )

    def entry(self, row: int) -> Entry:
        """One row."""
        own = row < self.written
        return Entry(
            label=str(self.label[row]),
            kind=str(self.kind[row]),
            x=float(self.x[row]),
            y=float(self.y[row]),
            electrons=float(self.electrons[row]),
            magnitude=float(self.magnitude[row]),
            separation=float(self.separation[row]),
            position_angle=float(self.position_angle[row]),
            partner=int(self.partner[row]),
            keys=self.keys[row] if own else {},
            catalogue=not own,
            shape=self.shapes[row] if own else None,
        )

    @property
    def entries(self) -> Iterator[Entry]:
        """All rows, one after another."""
        return (self.entry(row) for row in range(len(self)))


def inventory(
    scene: Scene,
    *,
    train: Train | None = None,
    base: FieldGeometry | None = None,
    geometry: FieldGeometry | None = None,
) -> Inventory:
    """Count out the objects of a scene.

    Parameters
    ----------
    scene : Scene
    train : Train, optional
        The scene's train, where it has been assembled already.
    base : FieldGeometry, optional
        In which the objects are placed; the scene's own unless given.
    geometry : FieldGeometry, optional
        The detector that looks at them, where it points elsewhere.

    Raises
    ------
    InputError
        A catalogue or a picture that cannot serve; a magnitude without an exposure time.
    """
    train = assemble_train(scene) if train is None else train
    base = field_geometry(scene) if base is None else base
    geometry = base if geometry is None else geometry
    directions = pointing_turn(base, geometry)
    turned = directions.direction(0.0) - field_geometry(scene).direction(0.0)
    light = photometry(scene, area=train.pupil.area, airmass=train.airmass, palette=train.palette)
    followed = scene.pointing.track if scene.pointing is not None else None
    rows: list[dict[str, Any]] = []
    for kind in ("star", "pair", "galaxy", "disc", "ring", "picture"):
        for number, one in enumerate(getattr(scene, kind)):
            label = one.label or f"{kind}-{number + 1}"
            extra = FOLLOWED if followed is not None and one.label == followed else 0
            colours = [train.palette.kinds[key] for key in colour_keys(one)]
            common = {
                "label": label,
                "kind": kind,
                "trail": (0.0, 0.0) if extra else _turned(object_trail(scene, one.motion), turned),
            }
            x, y = object_place(one, base)
            if isinstance(one, Pair):
                made = _pair_rows(scene, one, x, y, base, len(rows), light, colours)
            else:
                made = [
                    {
                        "x": x,
                        "y": y,
                        "electrons": _electrons(
                            one, one.electrons, one.magnitude, light, colours[0]
                        ),
                        "magnitude": np.nan if one.magnitude is None else one.magnitude,
                        "keys": {k: getattr(one, k) for k in SHAPE_KEYS if hasattr(one, k)},
                        "shape": sky_shape(scene, f"{kind}[{number}]", one, directions),
                    }
                ]
            for row, colour in zip(made, colours, strict=True):
                rows.append({**common, **row, "colour": colour + extra})
    columns: dict[str, list[AnyArray]] = {
        "label": [np.array([r["label"] for r in rows], dtype=str)],
        "kind": [np.array([r["kind"] for r in rows], dtype=str)],
        "partner": [np.array([r.get("partner", -1) for r in rows], dtype=np.int64)],
        "colour": [np.array([r["colour"] for r in rows], dtype=np.int64)],
    }
    for name in ("x", "y", "electrons", "magnitude", "separation", "position_angle"):
        columns[name] = [np.array([r.get(name, np.nan) for r in rows], dtype=np.float64)]
    for number, catalogue in enumerate(scene.catalogue):
        part = catalogue_rows(scene, number, catalogue, base, light)
        for name, values in columns.items():
            values.append(part[name])
    joined = {name: np.concatenate(values) for name, values in columns.items()}
    if geometry != base:
        joined["x"], joined["y"] = _seen(joined["x"], joined["y"], base, geometry)
    return Inventory(
        **joined,
        keys=tuple(r["keys"] for r in rows),
        shapes=tuple(r["shape"] for r in rows),
        trails=np.array([r["trail"] for r in rows], dtype=np.float64).reshape(len(rows), 2),
        turn=field_turn(scene),
        geometry=geometry,
        train=train,
        where=scene.name,
    )


def _seen(
    x: FloatArray, y: FloatArray, base: FieldGeometry, geometry: FieldGeometry
) -> tuple[FloatArray, FloatArray]:
    """Pixels of one detector as pixels of another; far off where it cannot see them."""
    ra, dec = base.to_sky(x, y)
    cosine = np.sin(dec) * np.sin(geometry.dec) + np.cos(dec) * np.cos(geometry.dec) * np.cos(
        ra - geometry.ra
    )
    seen = cosine > 0.01
    far = np.full(x.size, 1e9)
    there = far.copy(), far.copy()
    there[0][seen], there[1][seen] = geometry.from_sky(ra[seen], dec[seen])
    return there


def _turned(trail: tuple[float, float], angle: float) -> tuple[float, float]:
    """A trail turned by an angle from x towards y."""
    if trail == (0.0, 0.0) or angle == 0.0:
        return trail
    c, s = cos(angle), sin(angle)
    return trail[0] * c - trail[1] * s, trail[0] * s + trail[1] * c


def _electrons(
    one: Luminous | Pair,
    electrons: float | None,
    magnitude: float | None,
    light: Photometry,
    colour: int,
) -> float:
    if electrons is not None:
        return electrons
    assert magnitude is not None
    return float(
        light.electrons(magnitude, colour, band=one.magnitude_band, system=one.magnitude_system)
    )


def _pair_rows(
    scene: Scene,
    pair: Pair,
    x: float,
    y: float,
    geometry: FieldGeometry,
    row: int,
    light: Photometry,
    colours: list[int],
) -> list[dict[str, Any]]:
    """The two stars of a pair; the second stands off in the tangent plane."""
    separation, position_angle = pair_place(scene, pair)
    east, north = geometry.to_offsets(np.array(x), np.array(y))
    second = geometry.to_pixels(
        east + separation * np.sin(position_angle),
        north + separation * np.cos(position_angle),
    )
    magnitudes = pair.magnitudes or (None, None)
    electrons = pair.electrons or (None, None)
    places = ((x, y), (float(second[0]), float(second[1])))
    return [
        {
            "x": places[star][0],
            "y": places[star][1],
            "electrons": _electrons(pair, electrons[star], magnitudes[star], light, colours[star]),
            "magnitude": np.nan if magnitudes[star] is None else magnitudes[star],
            "separation": separation,
            "position_angle": position_angle % (2.0 * pi),
            "partner": row + 1 - star,
            "keys": {},
            "shape": None,
        }
        for star in (0, 1)
    ]
