"""A frame of several amplifiers as if one had read it all: each part at its own gain and bias.

Counts (ADU), of the mean gain and the mean bias.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from simimg.camera.amplifiers import amplifier_numbers, per_amplifier
from simimg.frame import Frame
from simimg.scene.camera import Camera


def evened(frame: Frame, camera: Camera) -> Frame:
    """Bring every amplifier's counts to the mean gain and bias of all.

    Parameters
    ----------
    frame : Frame
        As the camera wrote it.
    camera : Camera

    Returns
    -------
    Frame
        The frame itself where one amplifier reads all; else one of float64.
    """
    count = max(len(camera.amplifier_gains), len(camera.amplifier_biases), 1)
    if count == 1:
        return frame
    gains = camera.amplifier_gains or (camera.gain,) * count
    biases = camera.amplifier_biases or (camera.bias,) * count
    rows, columns = frame.counts.shape
    numbers = np.pad(
        amplifier_numbers((rows, columns - camera.prescan - camera.overscan), count),
        ((0, 0), (camera.prescan, camera.overscan)),
        mode="edge",
    )
    gain, bias = sum(gains) / count, sum(biases) / count
    above = frame.counts.astype(np.float64) - per_amplifier(numbers, biases)
    return replace(frame, counts=above * (per_amplifier(numbers, gains) / gain) + bias)
