"""Half wires cut into elements, and how functions on them are tested by the basis."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from worker.engine.thin_wire.basis import (
    END_ELEMENT_RADII,
    ReferenceElement,
    shape_values,
)

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class Discretisation:
    """B half wires cut into the same number of elements of the same degree.

    Unknowns are numbered element by element from the centre: unknown ``e * degree`` is the value
    at the boundary where element e starts, the rest of its run are bubbles. The boundary at the
    open end, where no current flows, has none.

    Attributes
    ----------
    element
        Reference element.
    breaks_m
        Boundaries from the centre to the end, (B, elements + 1).
    radius_m, wavenumber_per_m
        One of each a wire, (B,).
    """

    element: ReferenceElement
    breaks_m: FloatArray
    radius_m: FloatArray
    wavenumber_per_m: FloatArray

    @property
    def elements(self) -> int:
        """Number of elements on half a wire."""
        return int(self.breaks_m.shape[1]) - 1

    @property
    def unknowns(self) -> int:
        """Number of unknowns of an even current; an odd one has one less."""
        return self.elements * self.element.degree

    def nodes(self) -> FloatArray:
        """Gauss points (B, Q) of all elements, measured from the wire's centre."""
        middle = (self.breaks_m[:, 1:-1] + self.breaks_m[:, :-2]) / 2.0
        inner = middle[:, :, None] + self._half_lengths()[:, :, None] * self.element.node
        depth = END_ELEMENT_RADII * np.outer(self.radius_m, self._end_root() ** 2)
        end = self.breaks_m[:, -1:] - depth
        return np.concatenate([inner.reshape(len(inner), -1), end], axis=1)

    def weights(self) -> FloatArray:
        """Weights (B, Q) that integrate along half a wire."""
        inner = self._half_lengths()[:, :, None] * self.element.weight
        end = END_ELEMENT_RADII * np.outer(self.radius_m, self._end_root() * self.element.weight)
        return np.concatenate([inner.reshape(len(inner), -1), end], axis=1)

    def test_current(self, samples: FloatArray) -> FloatArray:
        """Integrals of the basis functions times a function sampled at the nodes.

        Parameters
        ----------
        samples
            (..., B, n, Q), already multiplied by `weights`.

        Returns
        -------
        (..., B, n, unknowns).
        """
        return self._assemble(samples, self.element.value)

    def test_charge(self, samples: FloatArray) -> FloatArray:
        """The same with the slopes of the basis functions; samples not multiplied by weights."""
        return self._assemble(samples, self.element.weight[:, None] * self.element.slope)

    def overlap(self, weights: FloatArray) -> FloatArray:
        """Integrals (B, unknowns, unknowns) of products of basis functions over half a wire."""
        # The functions at the nodes, (Q, unknowns), are those of the reference element on any wire.
        value = self.test_current(np.eye(weights.shape[1]))
        product: FloatArray = (value.T * weights[:, None, :]) @ value
        return product

    def evaluate(self, coefficients: ComplexArray, position_m: FloatArray) -> ComplexArray:
        """Current of an even coefficient vector (unknowns,) on the first wire.

        `position_m` (n,) counts from the centre and lies on the half wire.
        """
        breaks = self.breaks_m[0]
        place = np.clip(np.searchsorted(breaks, position_m, side="right") - 1, 0, self.elements - 1)
        start, stop = breaks[place], breaks[place + 1]
        tau = 2.0 * (position_m - start) / (stop - start) - 1.0
        depth = np.maximum(stop - position_m, 0.0) / (stop - start)
        tau = np.where(place == self.elements - 1, 1.0 - 2.0 * np.sqrt(depth), tau)
        degree = self.element.degree
        padded = np.append(coefficients, 0.0)
        local = padded[place[:, None] * degree + np.arange(degree + 1)]
        current: ComplexArray = np.sum(local * shape_values(degree, tau), axis=1)
        return current

    def _assemble(self, samples: FloatArray, table: FloatArray) -> FloatArray:
        degree = self.element.degree
        shape = (*samples.shape[:-1], self.elements)
        local = samples.reshape(*shape, self.element.node.size) @ table
        # The last shape function of one element and the first of the next are one hat.
        local[..., 1:, 0] += local[..., :-1, degree]
        assembled: FloatArray = local[..., :degree].reshape(*samples.shape[:-1], -1)
        return assembled

    def _half_lengths(self) -> FloatArray:
        return (self.breaks_m[:, 1:-1] - self.breaks_m[:, :-2]) / 2.0

    def _end_root(self) -> FloatArray:
        return (1.0 - self.element.node) / 2.0
