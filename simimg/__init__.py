"""simimg: what a telescope's detector will record, and whether two stars will come apart.

The public names load their modules when first asked for, so that ``import simimg`` is cheap.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

from simimg.version import __version__

if TYPE_CHECKING:
    from simimg.cube import Cube as Cube
    from simimg.errors import InputError as InputError
    from simimg.errors import RunError as RunError
    from simimg.exposure import expose as expose
    from simimg.exposure import noise_free as noise_free
    from simimg.filming import expose_cube as expose_cube
    from simimg.frame import Frame as Frame
    from simimg.resolving.bound import PairPrecision as PairPrecision
    from simimg.resolving.bound import precision as precision
    from simimg.resolving.limits import limits as limits
    from simimg.resolving.measure import measure as measure
    from simimg.resolving.records import PairMeasurement as PairMeasurement
    from simimg.scene.file import load_scene as load_scene
    from simimg.scene.model import Scene as Scene
    from simimg.study.solve import Solution as Solution
    from simimg.study.solve import solve as solve
    from simimg.study.sweep import Sweep as Sweep
    from simimg.study.sweep import Varied as Varied
    from simimg.study.sweep import sweep as sweep
    from simimg.study.trials import PairTrials as PairTrials
    from simimg.study.trials import trials as trials

_HOMES = {
    "Cube": "simimg.cube",
    "Frame": "simimg.frame",
    "InputError": "simimg.errors",
    "PairMeasurement": "simimg.resolving.records",
    "PairPrecision": "simimg.resolving.bound",
    "PairTrials": "simimg.study.trials",
    "RunError": "simimg.errors",
    "Scene": "simimg.scene.model",
    "Solution": "simimg.study.solve",
    "Sweep": "simimg.study.sweep",
    "Varied": "simimg.study.sweep",
    "expose": "simimg.exposure",
    "expose_cube": "simimg.filming",
    "limits": "simimg.resolving.limits",
    "load_scene": "simimg.scene.file",
    "measure": "simimg.resolving.measure",
    "noise_free": "simimg.exposure",
    "precision": "simimg.resolving.bound",
    "solve": "simimg.study.solve",
    "sweep": "simimg.study.sweep",
    "trials": "simimg.study.trials",
}

__all__ = ["__version__", *_HOMES]


def __getattr__(name: str) -> Any:
    if name not in _HOMES:
        raise AttributeError(f"module 'simimg' has no attribute {name!r}")
    value = getattr(import_module(_HOMES[name]), name)
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted(__all__)
