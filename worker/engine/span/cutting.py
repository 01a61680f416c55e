"""What to cut from the reel: each leg's electrical length, what wraps take up, and an allowance."""

from __future__ import annotations

from dataclasses import dataclass

from worker.engine.limits import require_within


@dataclass(frozen=True, slots=True)
class Leg:
    """One leg of a dipole: its electrical length and the wire to cut for it, in m."""

    electrical_m: float
    cut_m: float


def cutting_lengths(
    length_m: float,
    feed_fraction: float,
    *,
    end_wrap_m: float,
    feed_wrap_m: float,
    allowance_fraction: float,
) -> tuple[Leg, Leg]:
    """Wire to cut for the two legs of a dipole.

    Parameters
    ----------
    length_m
        Electrical length from end to end, 1e-2 to 1e5 m: to where the wire turns back at an
        insulator.
    feed_fraction
        Place of the feed from the near end, 0.01 to 0.99.
    end_wrap_m, feed_wrap_m
        Wire that is wrapped back at an end's insulator and at the feed point, 0 to 10 m.
    allowance_fraction
        More to trim away, as a part of the electrical length, 0 to 0.5.

    Returns
    -------
    tuple of Leg
        The near leg, which `feed_fraction` counts along, and the far one.

    Raises
    ------
    OutOfRange
        A value outside its range.

    References
    ----------
    Common practice: legs are cut long and shortened until resonance stands where it should.
    """
    require_within("length_m", length_m, 1e-2, 1e5, "m")
    require_within("feed_fraction", feed_fraction, 0.01, 0.99)
    require_within("end_wrap_m", end_wrap_m, 0.0, 10.0, "m")
    require_within("feed_wrap_m", feed_wrap_m, 0.0, 10.0, "m")
    require_within("allowance_fraction", allowance_fraction, 0.0, 0.5)
    wraps_m = end_wrap_m + feed_wrap_m

    def leg(fraction: float) -> Leg:
        electrical_m = fraction * length_m
        return Leg(electrical_m, electrical_m * (1.0 + allowance_fraction) + wraps_m)

    return leg(feed_fraction), leg(1.0 - feed_fraction)
