"""What an answer about resistances is made of, in the solver's numbers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from service.core.network import Network

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Rises:
    """A matrix of potentials per unit flow, shape (n, n), and its bound, entry by entry."""

    value: FloatArray
    bound: FloatArray


@dataclass(frozen=True, eq=False)
class Resistances:
    """Matrices of resistances between pads, and their network.

    mean: rise of each pad per unit flow into each; None where it has no bound, or no flow finds a way out.
    peak: largest rises, where they were asked for.
    pairs: potential between two pads per unit flow from one to the other, the others passing none.
    network: None where it has no bound. agreement, agreement_bound: of a second computation of so many entries.
    """

    mean: Rises | None
    peak: Rises | None
    pairs: Rises
    network: Network | None
    agreement: float | None
    agreement_bound: float | None
    checked: int
    method: str
