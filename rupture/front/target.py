"""What is sampled for one kind of rupture: prior, likelihood and names, in the sampler's coordinates."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.front.lines import ANGLES, FREE, LinePrior, same_first_arm, to_parameters
from rupture.front.windows import Windows

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Target:
    """Posterior of one kind of line source.

    Attributes
    ----------
    kind, windows, prior
        What is fitted to what.
    trust
        Share of the log-likelihood that counts.
    """

    kind: str
    windows: Windows
    prior: LinePrior
    trust: float

    @property
    def angles(self) -> list[int]:
        """Coordinates that go round a circle."""
        return [column for column, parameter in enumerate(FREE[self.kind]) if parameter in ANGLES]

    def draw(self, rng: np.random.Generator, count: int) -> Array:
        """Return draws of the prior, shape (count, coordinates)."""
        return self.prior.draw(self.kind, rng, count)

    def log_prior(self, draws: Array) -> Array:
        """Return log prior densities, shape (count,)."""
        return self.prior.log_density(self.kind, draws)

    def log_likelihood(self, draws: Array) -> Array:
        """Return log-likelihoods of all sites together, shape (count,)."""
        total: Array = self.windows.log_likelihood(to_parameters(self.kind, draws)).sum(axis=1)
        return self.trust * total

    def counted(self, draws: Array, multiple: Array) -> Array:
        """Return the same for several countings of windows, shape (countings, count)."""
        total: Array = self.windows.counted(to_parameters(self.kind, draws), multiple).sum(axis=1).T
        return self.trust * total

    def rename(self, draws: Array) -> Array:
        """Return draws whose arms are named alike."""
        return same_first_arm(self.kind, draws)
