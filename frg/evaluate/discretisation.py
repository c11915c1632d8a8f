"""The contract between running functions and vectors of unknowns."""

from __future__ import annotations

import abc
from collections.abc import Mapping
from typing import Any

import numpy as np


class AbstractDiscretisation(abc.ABC):
    """Unknowns <-> functions. Knows nothing of the flow it serves.

    The vector of unknowns g (size,) is in reported normalisation (the couplings under the names of the
    truncation file). Numbers are jax scalars, jax arrays over grid points or truncated series."""

    @property
    @abc.abstractmethod
    def names(self) -> tuple[str, ...]:
        """Names of all unknowns, padded to the largest order."""

    @property
    def size(self) -> int:
        return len(self.names)

    @abc.abstractmethod
    def active(self, order: int | None) -> np.ndarray:
        """(size,) which unknowns exist at this order of the study."""

    @abc.abstractmethod
    def unit(self, coordinate: float, value: float) -> np.ndarray:
        """(size,) natural size of every unknown for coordinates and functions of the given sizes."""

    @abc.abstractmethod
    def numbers(self, g: Any, box: Any) -> dict[str, Any]:
        """Coordinates and jets, by symbol name, as numbers in which the flow is to be evaluated."""

    @abc.abstractmethod
    def rows(self, g: Any, flows: Mapping[str, Any]) -> Any:
        """(size,) the right-hand side b of M(g) dg/dt = b from the numbers d_t(function) at fixed coordinates."""

    @abc.abstractmethod
    def mass(self, g: Any, box: Any) -> Any:
        """(size, size) the matrix M(g) of M(g) dg/dt = b."""

    def search_rows(self, g: Any, b: Any) -> Any:
        """b with known trivial factors divided out, for the search of zeros."""
        return b

    @abc.abstractmethod
    def jets_at(self, g: Any, x: Any, name: str, orders: tuple[int, ...], box: Any) -> Any:
        """A jet of one function at the point x of the (single) coordinate, as a plain number."""

    def expansion_point(self, g: Any) -> Any:
        """The running point of expansion if there is one, else None."""
        return None
