"""Far field of a horizontal wire: intensity, gain, lobes and the power radiated."""

from worker.engine.field.current import RadiatingWire, RadiationVector
from worker.engine.field.gain import (
    Cut,
    PowerBudget,
    azimuth_cut,
    elevation_cut,
    gain_dbi,
    power_budget,
)
from worker.engine.field.intensity import (
    RadiatedPower,
    far_field,
    fresnel,
    radiated_power,
    radiation_intensity,
)
from worker.engine.field.lobe import Lobe, Pattern, lobes, pattern
from worker.engine.field.principal import PrincipalPattern, principal_pattern

__all__ = [
    "Cut",
    "Lobe",
    "Pattern",
    "PowerBudget",
    "PrincipalPattern",
    "RadiatedPower",
    "RadiatingWire",
    "RadiationVector",
    "azimuth_cut",
    "elevation_cut",
    "far_field",
    "fresnel",
    "gain_dbi",
    "lobes",
    "pattern",
    "power_budget",
    "principal_pattern",
    "radiated_power",
    "radiation_intensity",
]
