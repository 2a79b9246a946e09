"""Some frames of a cube beside each other, to look at."""

from __future__ import annotations

import numpy as np

from simimg.cube import Cube
from simimg.frame import Frame

_ACROSS = 3


def cube_strip(cube: Cube, most: int = 6) -> Frame:
    """Frames of a cube, evenly spread in time, three to a row.

    Parameters
    ----------
    cube : Cube
    most : int, optional
        Frames to show at most, 1 or more; the first is among them. They run from the left to the
        right, and from the upper row to the lower.

    Returns
    -------
    Frame
        Without coordinates and truth: not to be measured.
    """
    count = min(most, len(cube))
    chosen = [cube.planes[k * len(cube) // count] for k in range(count)]
    across = min(count, _ACROSS)
    # A row that is not full is filled up with the emptiest level that there is.
    spare = np.full_like(chosen[0], min(plane.min() for plane in chosen))
    chosen += [spare] * (-count % across)
    rows = [np.hstack(chosen[k : k + across]) for k in range(0, len(chosen), across)]
    return Frame(counts=np.vstack(rows[::-1]), header=cube.header, simulated=cube.simulated)
