"""Weather on a wire: temperature, wind and ice, and the load per metre they make."""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, pi
from typing import Final

from worker.engine.limits import require_within
from worker.engine.span.conductor_strength import STANDARD_GRAVITY_M_PER_S2, Line

#: Glaze ice, 57 lb/ft³ as the National Electrical Safety Code takes it (from memory).
ICE_KG_PER_M3: Final = 913.0


@dataclass(frozen=True, slots=True)
class Weather:
    """One state of the weather.

    Parameters
    ----------
    temperature_c : float
        Of the wire, -100 to 200 °C.
    wind_pa : float
        Pressure on the wire's outline across the wind, drag included, 0 to 1e5 Pa.
    ice_m : float
        Thickness of ice all around, 0 to 0.5 m.

    Raises
    ------
    OutOfRange
        A value outside its range.
    """

    temperature_c: float
    wind_pa: float = 0.0
    ice_m: float = 0.0

    def __post_init__(self) -> None:
        """Refuse weather beyond the ranges."""
        require_within("temperature_c", self.temperature_c, -100.0, 200.0, "°C")
        require_within("wind_pa", self.wind_pa, 0.0, 1e5, "Pa")
        require_within("ice_m", self.ice_m, 0.0, 0.5, "m")


@dataclass(frozen=True, slots=True)
class LoadPerMetre:
    """Load on a line in N/m: down, across, and both together."""

    weight_n_per_m: float
    wind_n_per_m: float

    @property
    def resultant_n_per_m(self) -> float:
        """Size of both together: they stand at right angles."""
        return hypot(self.weight_n_per_m, self.wind_n_per_m)


def load_per_metre(line: Line, weather: Weather) -> LoadPerMetre:
    """Weight of line and ice, and wind on the outline of both.

    Notes
    -----
    Ice of thickness t around a diameter d has the section ``pi t (d + t)`` and the outline
    ``d + 2 t``. Wind blows level and at right angles to the span, the worst it can.

    References
    ----------
    National Electrical Safety Code, rule 251 (resultant of weight, ice and wind), from memory.
    """
    ice_m2 = pi * weather.ice_m * (line.diameter_m + weather.ice_m)
    mass_kg_per_m = line.mass_kg_per_m + ICE_KG_PER_M3 * ice_m2
    return LoadPerMetre(
        weight_n_per_m=STANDARD_GRAVITY_M_PER_S2 * mass_kg_per_m,
        wind_n_per_m=weather.wind_pa * (line.diameter_m + 2.0 * weather.ice_m),
    )
