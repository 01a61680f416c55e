"""Sizes of solid wire: American wire gauge, and metric sizes by nominal cross-section."""

from __future__ import annotations

from math import pi, sqrt

from worker.engine.limits import require_within


def awg_diameter_m(gauge: int) -> float:
    """Diameter of a solid wire by American wire gauge.

    Parameters
    ----------
    gauge
        Gauge number, -3 (for 4/0) to 56.

    Returns
    -------
    float
        Diameter in metres, unrounded.

    Raises
    ------
    OutOfRange
        A gauge outside its range.

    Notes
    -----
    ``d = 0.005 inch * 92^((36 - n) / 39)``.

    References
    ----------
    ASTM B258, "Standard nominal diameters and cross-sectional areas of AWG sizes".
    """
    require_within("gauge", gauge, -3, 56)
    return float(0.005 * 0.0254 * 92.0 ** ((36 - gauge) / 39))


def diameter_from_area_m(area_m2: float) -> float:
    """Diameter of the solid round wire of a nominal cross-section, as metric sizes are named.

    Parameters
    ----------
    area_m2
        Cross-section, 1e-11 to 1e-2 m² (2.5e-6 for the "2.5 mm²" size).

    Returns
    -------
    float
        Diameter in metres.

    Raises
    ------
    OutOfRange
        An area outside its range.

    Notes
    -----
    ``d = 2 sqrt(A / pi)``. The standard fixes a greatest resistance, not a diameter: real wire
    of a nominal size may be a few per cent thinner.

    References
    ----------
    IEC 60228, "Conductors of insulated cables" (nominal cross-sections).
    """
    require_within("area_m2", area_m2, 1e-11, 1e-2, "m²")
    return 2.0 * sqrt(area_m2 / pi)
