"""From the wire to the point where the limits apply: transformer, network, line.

The order is wire, transformer, L-network (if allowed), feed line, transmitter. Everything is
vectorised over bands, frequencies and wires.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from worker.engine.constants import SPEED_OF_LIGHT_M_PER_S
from worker.engine.feed_line import FeedLine, terminate
from worker.engine.reflection import standing_wave_ratio

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]
SingleArray = NDArray[np.float32]

#: Solutions of an L-network: shunt part next to the antenna or next to the line, and two signs.
NETWORKS: Final = ((True, 1.0), (True, -1.0), (False, 1.0), (False, -1.0))

#: A line of an impedance this near to the reference, in parts of it, makes no ripples.
_OF_THE_REFERENCE: Final = 0.05

#: Stands for the network of a load that has no solution of that form: it matches nothing.
_NO_MATCH_OHM: Final = 1e9


@dataclass(frozen=True, slots=True)
class Fed:
    """What arrives at the points that matter; arrays of the impedance's shape.

    Attributes
    ----------
    behind_ohm : ndarray
        Impedance on the line side of network and transformer.
    swr : ndarray
        Standing wave ratio there.
    limited_swr : ndarray
        The one the limits apply to: there, or at the transmitter.
    transmitter_swr, line_loss_db : ndarray or None
        At the other end of the feed line, and its total loss; None without a line.
    """

    behind_ohm: ComplexArray
    swr: FloatArray
    limited_swr: FloatArray
    transmitter_swr: FloatArray | None
    line_loss_db: FloatArray | None


@dataclass(frozen=True, slots=True)
class Load:
    """Impedances at feed points, with what every ratio asks of them; arrays of one shape.

    Single precision is far finer than what wires are told apart by, at half the time.

    Attributes
    ----------
    impedance_ohm : ndarray
    resistance_ohm, squared : ndarray of single precision
        The real part, and |Z|².
    """

    impedance_ohm: ComplexArray
    resistance_ohm: SingleArray
    squared: SingleArray

    @classmethod
    def of(cls, impedance_ohm: ComplexArray) -> Load:
        """The load of some impedances."""
        squared = impedance_ohm.real**2 + impedance_ohm.imag**2
        resistance = impedance_ohm.real.astype(np.float32)
        return cls(impedance_ohm, resistance, squared.astype(np.float32))

    def some(self, wires: slice) -> Load:
        """Some of the wires, along the last axis."""
        return Load(
            self.impedance_ohm[..., wires],
            self.resistance_ohm[..., wires],
            self.squared[..., wires],
        )


@dataclass(frozen=True, slots=True)
class Feeding:
    """How the wires of a search are fed, but for the transformer's ratio, which varies.

    Attributes
    ----------
    reference_ohm : float
        Impedance every SWR is taken against, in Ω.
    line : FeedLine or None
    line_length_m : float
    at_transmitter : bool
        Whether limits apply at the transmitter, else at the feed point.
    matched : bool
        Whether an L-network at the feed point matches each band at its centre.
    """

    reference_ohm: float
    line: FeedLine | None = None
    line_length_m: float = 0.0
    at_transmitter: bool = False
    matched: bool = False

    @property
    def ripple_hz(self) -> float:
        """Period over frequency of what a line makes of a mismatch, where the limits apply.

        Infinite where they apply at the feed point, or the line is one of the reference.
        """
        if self.line is None or not self.at_transmitter or self.line_length_m == 0.0:
            return np.inf
        if abs(self.line.nominal_impedance_ohm / self.reference_ohm - 1.0) < _OF_THE_REFERENCE:
            return np.inf
        speed_m_per_s = SPEED_OF_LIGHT_M_PER_S * self.line.velocity_factor
        return speed_m_per_s / (2.0 * self.line_length_m)

    def feed(
        self,
        impedance_ohm: ComplexArray,
        frequency_hz: FloatArray,
        ratio: float,
        network: int | None = None,
    ) -> Fed:
        """Follow the power of a band back to where it is judged.

        Parameters
        ----------
        impedance_ohm : ndarray, shape (p, n)
            At the feed points of n wires, at p frequencies of one band.
        frequency_hz : ndarray, shape (p,)
            Symmetric about the band's centre, where a network matches.
        ratio : float
            Impedance ratio of the transformer, antenna side to line side.
        network : int, optional
            Which of ``NETWORKS`` matches; by default the best for each wire.
        """
        behind = impedance_ohm / ratio
        if self.matched and network is None:
            behind = self.best_network(behind, frequency_hz)[1]
        elif self.matched and network is not None:
            behind = self._through_network(behind, frequency_hz, *NETWORKS[network])
        swr = np.asarray(standing_wave_ratio(behind, self.reference_ohm))
        if self.line is None:
            return Fed(behind, swr, swr, None, None)
        state = terminate(self.line, self.line_length_m, frequency_hz[:, None], behind)
        far = np.asarray(standing_wave_ratio(state.input_impedance_ohm, self.reference_ohm))
        limited = far if self.at_transmitter else swr
        return Fed(behind, swr, limited, far, np.asarray(state.total_loss_db))

    def reflected_power(
        self, load: Load, frequency_hz: FloatArray, ratio: float
    ) -> tuple[FloatArray | SingleArray, FloatArray | None]:
        """What the scan needs, and no more: |Γ|² where the limits apply, and the line's loss.

        Parameters
        ----------
        load : Load
            At the feed points of n wires, at p frequencies of b bands; arrays (b, p, n).
        frequency_hz : ndarray, shape (b, p)
        ratio : float

        Returns
        -------
        reflected : ndarray, shape (b, p, n)
        loss_db : ndarray, shape (b, n), or None
            At the middle frequency of each band; None without a line.
        """
        if self.line is None and not self.matched:
            # 1 - |Γ|² = 4 R R0 / ((R + R0)² + X²), with R0 seen through the transformer.
            match_ohm = ratio * self.reference_ohm
            taken = (4.0 * match_ohm) * load.resistance_ohm
            against = 0.5 * taken
            against += load.squared
            against += match_ohm**2
            np.divide(taken, against, out=taken)
            np.subtract(1.0, taken, out=taken)
            return np.maximum(taken, 0.0, out=taken), None
        impedance_ohm = load.impedance_ohm
        reflected = np.empty(impedance_ohm.shape)
        loss_db = None if self.line is None else np.empty(impedance_ohm[:, 0].shape)
        for index in range(len(impedance_ohm)):
            fed = self.feed(impedance_ohm[index], frequency_hz[index], ratio)
            reflected[index] = reflected_of(fed.limited_swr)
            if loss_db is not None and fed.line_loss_db is not None:
                loss_db[index] = fed.line_loss_db[len(frequency_hz[index]) // 2]
        return reflected, loss_db

    def best_network(
        self, load_ohm: ComplexArray, frequency_hz: FloatArray
    ) -> tuple[NDArray[np.intp], ComplexArray]:
        """The L-network that keeps a band's SWR, where the limits apply, lowest at its highest.

        Parameters
        ----------
        load_ohm : ndarray, shape (p, n)
            Behind the transformer.
        frequency_hz : ndarray, shape (p,)

        Returns
        -------
        which : ndarray, shape (n,)
            Index into ``NETWORKS``.
        through_ohm : ndarray, shape (p, n)
            Impedance on the line side of that network.
        """
        through = np.array(
            [self._through_network(load_ohm, frequency_hz, *network) for network in NETWORKS]
        )
        judged = through
        if self.line is not None and self.at_transmitter:
            hertz = frequency_hz[:, None]
            judged = terminate(self.line, self.line_length_m, hertz, through).input_impedance_ohm
        worst = np.max(standing_wave_ratio(judged, self.reference_ohm), axis=1)
        which = np.argmin(worst, axis=0)
        return which, np.take_along_axis(through, which[None, None, :], axis=0)[0]

    def _through_network(
        self, load_ohm: ComplexArray, frequency_hz: FloatArray, shunt_at_load: bool, sign: float
    ) -> ComplexArray:
        """A lossless network designed at the middle frequency, seen at all of them.

        Reactances keep their sign with frequency: a positive series reactance or a negative
        shunt susceptance is an inductor, the others are capacitors.

        References
        ----------
        D. M. Pozar, "Microwave Engineering", 4th ed., 2012, sec. 5.1, eqs. (5.3) to (5.6).
        """
        middle = len(frequency_hz) // 2
        series_ohm, shunt_s = network_values(
            load_ohm[middle], self.reference_ohm, shunt_at_load=shunt_at_load, sign=sign
        )
        relative = (frequency_hz / frequency_hz[middle])[:, None]
        series = np.where(series_ohm >= 0.0, series_ohm * relative, series_ohm / relative)
        shunt = np.where(shunt_s >= 0.0, shunt_s * relative, shunt_s / relative)
        # A load without a solution of this form has NaN here, and is told so below.
        with np.errstate(invalid="ignore", divide="ignore"):
            if shunt_at_load:
                through = 1j * series + 1.0 / (1j * shunt + 1.0 / load_ohm)
            else:
                through = 1.0 / (1j * shunt + 1.0 / (load_ohm + 1j * series))
        return np.where(np.isfinite(through), through, _NO_MATCH_OHM)


def reflected_of(swr: FloatArray) -> FloatArray:
    """The part of the power that is reflected at a standing wave ratio, |Γ|²."""
    return np.asarray(((swr - 1.0) / (swr + 1.0)) ** 2)


def network_values(
    load_ohm: ComplexArray, reference_ohm: float, *, shunt_at_load: bool, sign: float
) -> tuple[FloatArray, FloatArray]:
    """Series reactance (Ω) and shunt susceptance (S) that match loads; NaN where none does.

    Parameters
    ----------
    load_ohm : ndarray
    reference_ohm : float
    shunt_at_load : bool
        Whether the shunt part is next to the load, else next to the line.
    sign : {1.0, -1.0}
        Which of the two solutions.
    """
    resistance, reactance = load_ohm.real, load_ohm.imag
    with np.errstate(invalid="ignore", divide="ignore"):
        if shunt_at_load:
            square = resistance**2 + reactance**2
            root = np.sqrt(resistance / reference_ohm) * np.sqrt(
                square - reference_ohm * resistance
            )
            shunt = (reactance + sign * root) / square
            series = (
                1.0 / shunt
                + reactance * reference_ohm / resistance
                - reference_ohm / (shunt * resistance)
            )
        else:
            series = sign * np.sqrt(resistance * (reference_ohm - resistance)) - reactance
            shunt = sign * np.sqrt((reference_ohm - resistance) / resistance) / reference_ohm
    return series, shunt
