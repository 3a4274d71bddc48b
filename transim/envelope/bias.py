"""Bias waveforms of one run, under the names that ngspice gives them."""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import numpy as np
import numpy.typing as npt

from transim.envelope.junction import Array
from transim.errors import RawFileError

__all__ = ["Bias"]


class Bias:
    """Bias waveforms of one run, by node, source and device.

    Parameters
    ----------
    vectors : mapping
        Name as ngspice prints it (``v(a)``, ``i(v1)``, ``v(@d1[vd])`` ...) to an array of shape (n,).
    time : ndarray, shape (n,)
        Time of the samples [s].
    """

    def __init__(self, vectors: Mapping[str, Array], time: Array) -> None:
        self._vectors = vectors
        self.time = time

    @property
    def points(self) -> int:
        """Number of samples."""
        return int(self.time.size)

    def at(self, points: npt.NDArray[np.intp]) -> Bias:
        """Return the bias at some of its samples only."""
        return Bias({name: values[points] for name, values in self._vectors.items()}, self.time[points])

    def voltage(self, node: str) -> Array:
        """Return the voltage of a node to ground [V], shape (n,)."""
        if node == "0":
            return np.zeros(self.points)
        return self._find(f"v({node})", node)

    def current(self, source: str) -> Array:
        """Return the current through a source from its plus to its minus node [A], shape (n,)."""
        return self._find(f"i({source})", f"{source}#branch")

    def device(self, name: str, quantity: str) -> Array:
        """Return an internal quantity of a device, such as ``vbe`` [V], shape (n,)."""
        vector = f"@{name}[{quantity}]"
        return self._find(vector, f"v({vector})", f"i({vector})")

    def _find(self, *names: str) -> Array:
        for name in names:
            if name in self._vectors:
                return np.broadcast_to(self._vectors[name], self.time.shape)
        raise RawFileError(f"the run did not save {names[0]}, which the envelope solver needs")

    def probes(self, nodes: Iterable[str], sources: Iterable[str]) -> dict[str, Array]:
        """Return the bias that an expression depends on, keyed as `Expression.evaluate` wants it."""
        found = {f"v:{node}": self.voltage(node) for node in nodes}
        found.update({f"i:{source}": self.current(source) for source in sources})
        found["time"] = self.time
        return found
