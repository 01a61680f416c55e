"""Transformers and baluns by their impedance ratio, antenna side to line side."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from worker.engine.limits import require_magnitude_within, require_within


@dataclass(frozen=True, slots=True)
class Transformer:
    """A transformer or balun between antenna and line.

    Parameters
    ----------
    ratio
        Impedance ratio, antenna side to line side, 0.01 to 100 (4.0 for "4:1").
    loss_db
        Loss, 0 to 20 dB, taken as independent of the load. A real core loses more the further
        its load lies from the design impedance (common practice).

    Raises
    ------
    OutOfRange
        A figure outside its range.
    """

    ratio: float
    loss_db: float = 0.0

    def __post_init__(self) -> None:
        """Refuse what is no transformer."""
        require_within("ratio", self.ratio, 0.01, 100.0)
        require_within("loss_db", self.loss_db, 0.0, 20.0, "dB")

    @property
    def efficiency(self) -> float:
        """Power at the antenna side over power at the line side."""
        return float(10.0 ** (-self.loss_db / 10.0))

    def line_side_ohm(self, antenna_side_ohm: ArrayLike) -> NDArray[np.complex128]:
        """Impedance that the line sees.

        Parameters
        ----------
        antenna_side_ohm
            Complex impedance of the antenna, any shape, at most 1e12 ohm.

        Returns
        -------
        numpy.ndarray
            Impedance in ohm, same shape.

        Raises
        ------
        OutOfRange
            An impedance outside its range.

        Notes
        -----
        ``Z / ratio``: ideal transformation, resistance and reactance alike.
        """
        antenna = require_magnitude_within("antenna_side_ohm", antenna_side_ohm, 0.0, 1e12, "ohm")
        return np.asarray(antenna / self.ratio)

    def antenna_side_ohm(self, line_side_ohm: ArrayLike) -> NDArray[np.complex128]:
        """Impedance that the antenna sees, the inverse of :meth:`line_side_ohm`.

        Parameters
        ----------
        line_side_ohm
            Complex impedance of the line, any shape, at most 1e12 ohm.

        Returns
        -------
        numpy.ndarray
            Impedance in ohm, same shape.

        Raises
        ------
        OutOfRange
            An impedance outside its range.
        """
        line = require_magnitude_within("line_side_ohm", line_side_ohm, 0.0, 1e12, "ohm")
        return np.asarray(line * self.ratio)
