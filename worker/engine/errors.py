"""Errors that the engine raises.

EngineError
├── OutOfRange       an input lies outside the range where the method holds
└── NotConverged     an iteration or a refinement stopped short of its tolerance
"""

from __future__ import annotations


class EngineError(Exception):
    """Root of every error the engine raises on purpose."""


class OutOfRange(EngineError, ValueError):
    """An input lies outside its permitted range.

    Parameters
    ----------
    quantity
        Name of the quantity, with its unit suffix as in the signature (``radius_m``) or as a
        phrase for a derived one (``length in wavelengths``).
    value
        The offending value; for an array, one offending element.
    low, high
        Permitted range, both ends included unless the quantity's own documentation says so;
        infinite where one side is open.
    unit
        SI unit, empty for a pure number.
    """

    def __init__(
        self,
        quantity: str,
        value: float | complex,
        low: float,
        high: float,
        unit: str = "",
    ) -> None:
        self.quantity = quantity
        self.value = value
        self.low = low
        self.high = high
        self.unit = unit
        suffix = f" {unit}" if unit else ""
        super().__init__(
            f"{quantity} = {value:.6g}{suffix} is outside the range {low:.6g} to {high:.6g}{suffix}"
        )

    def __reduce__(self) -> tuple[type[OutOfRange], tuple[str, float | complex, float, float, str]]:
        """Pickle by the five facts, so that the error survives a process boundary."""
        return type(self), (self.quantity, self.value, self.low, self.high, self.unit)


class NotConverged(EngineError, ArithmeticError):
    """A result did not reach its tolerance.

    Parameters
    ----------
    quantity
        What was being computed.
    estimated_error
        Error estimate when the computation stopped, in `unit`.
    tolerance
        What was asked for, in `unit`.
    unit
        SI unit of both, empty for a relative error.
    """

    def __init__(
        self, quantity: str, estimated_error: float, tolerance: float, unit: str = ""
    ) -> None:
        self.quantity = quantity
        self.estimated_error = estimated_error
        self.tolerance = tolerance
        self.unit = unit
        suffix = f" {unit}" if unit else ""
        super().__init__(
            f"{quantity} did not converge: estimated error {estimated_error:.3g}{suffix}, "
            f"asked for {tolerance:.3g}{suffix}"
        )

    def __reduce__(self) -> tuple[type[NotConverged], tuple[str, float, float, str]]:
        """Pickle by the four facts, so that the error survives a process boundary."""
        return type(self), (self.quantity, self.estimated_error, self.tolerance, self.unit)
