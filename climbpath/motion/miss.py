"""The chance that a hand misses its hold, and what that costs on average.

A hand that lands while the body moves at speed v is late or early by a random time, so it comes
down off its hold by σ = σ₀ + v τ. It holds if it comes within a catch of a hold's own size and of
the reach the arm has to spare there: full stretch leaves nothing to correct with. With errors
normal along the arm, the chance of a miss is 2 Φ(−(catch + spare) / σ). That spread grows with
speed is Schmidt's law of aimed movements (from memory); the figures are choices of the model.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtr

Array = NDArray[np.float64]


@dataclass(frozen=True)
class MissRule:
    """``still``: σ₀ [m] at rest; ``timing``: τ [s]; ``catch`` [m]; ``lost``: what a miss costs [s].
    """

    still: float = 0.01
    timing: float = 0.015
    catch: float = 0.03
    lost: float = 1.0

    def chance(self, spare: Array, speed: Array) -> Array:
        """Chance of a miss with ``spare`` reach [m] at ``speed`` [m/s], any one shape."""
        spread = self.still + self.timing * np.abs(speed)
        return np.asarray(2.0 * ndtr(-(self.catch + np.maximum(spare, 0.0)) / spread))

    def cost(self, spare: Array, speed: Array) -> Array:
        """Time lost on average [s]."""
        return self.lost * self.chance(spare, speed)
