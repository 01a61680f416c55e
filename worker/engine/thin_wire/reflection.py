"""What the ground adds to the thin-wire equation, as the wire sees it."""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numpy.typing import NDArray


class ReflectedPotentials(Protocol):
    """Reflected Green's functions between two points of one horizontal wire.

    One object stands for one frequency and one height over one ground, and serves every length
    and radius of wire hung there.

    Notes
    -----
    The mixed-potential equation, with :math:`g_0 = e^{-jkR}/(4\\pi R)` and time convention
    :math:`e^{+j\\omega t}`, reads

    .. math::

        E_x = -j\\omega\\mu_0 \\int I (g_0 + g_A)\\,dx'
              - \\frac{d}{dx} \\frac{1}{\\varepsilon_0} \\int q\\,(g_0 + g_\\Phi)\\,dx',
        \\qquad q = -\\frac{1}{j\\omega} \\frac{dI}{dx'}.

    Over a perfect conductor both functions are :math:`-e^{-jkR_1}/(4\\pi R_1)` with
    :math:`R_1 = \\sqrt{\\rho^2 + (2h)^2}`.
    """

    @property
    def frequency_hz(self) -> float:
        """Frequency the potentials hold for."""

    @property
    def height_m(self) -> float:
        """Height of the wire's axis; twice it is the shortest length on which they vary."""

    def vector_potential(self, distance_m: NDArray[np.float64]) -> NDArray[np.complex128]:
        """Reflected vector-potential function g_A (1/m) at horizontal distances >= 0."""

    def scalar_potential(self, distance_m: NDArray[np.float64]) -> NDArray[np.complex128]:
        """Reflected scalar-potential function g_Phi (1/m) at horizontal distances >= 0."""
