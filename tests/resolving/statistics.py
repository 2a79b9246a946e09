"""What many noise draws of a fit must show, as one judgement that can fail."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np


@dataclass(frozen=True)
class Draws:
    """Deviations from the truth and quoted errors, shape (draws, quantities); the bounds."""

    deviations: np.ndarray
    quoted: np.ndarray
    bound: np.ndarray

    def faults(self) -> list[str]:
        """Everything that is not as it should be: scatter, quoted errors, bias."""
        scatter = self.deviations.std(axis=0)
        over_bound = scatter / self.bound
        over_scatter = np.median(self.quoted, axis=0) / scatter
        bias = np.abs(self.deviations.mean(axis=0)) / scatter
        faults = []
        for i in range(scatter.size):
            if not 0.9 < over_bound[i] < 1.1:
                faults.append(f"quantity {i}: scatter {over_bound[i]:.3f} of the bound")
            if not 0.9 < over_scatter[i] < 1.1:
                faults.append(f"quantity {i}: errors {over_scatter[i]:.3f} of the scatter")
            if not bias[i] < 1.0 / 3.0:
                faults.append(f"quantity {i}: bias {bias[i]:.3f} of the error")
        return faults
