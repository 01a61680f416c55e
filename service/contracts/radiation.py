"""What a candidate's pictures need: the current along the wire and the pattern, band by band."""

from __future__ import annotations

from service.contracts.quantities import Contract


class CurrentAlong(Contract):
    """The current at places evenly spaced along the wire, at the centre of a band.

    The first place is the end from which ``feed_fraction`` counts, the last the other end.
    ``size`` is |I| over the largest of the places, ``phase_deg`` the phase against that one,
    and ``at_feed`` the size at the feed: |I| there over the largest.
    """

    size: tuple[float, ...]
    phase_deg: tuple[float, ...]
    at_feed: float


class Radiation(Contract):
    """What the wire radiates at the centre of a band, in dBi of the power accepted at the feed.

    Azimuth counts from the wire's own direction, towards the end that ``feed_fraction`` does
    not count from. ``gain_dbi`` is the largest gain, at elevation ``take_off_deg`` and
    ``azimuth_deg``, and as much at minus that azimuth. The cuts go in steps of ``step_deg``:
    ``broadside_dbi`` in the vertical plane across the wire from the horizon to the zenith, its
    other side alike; ``end_on_dbi`` in the vertical plane along the wire, from the horizon over
    the zenith to the horizon; ``around_dbi`` at the take-off angle over azimuths from 0 to 180°,
    the rest alike. In free space there is no horizon: the pattern turns about the wire.

    The fractions are parts of the power accepted: radiated to the sky or, in free space, all
    around; turned into heat in wire and insulation; taken up by the ground, where it takes any.
    """

    gain_dbi: float
    take_off_deg: float
    azimuth_deg: float
    radiated_fraction: float
    wire_loss_fraction: float
    ground_loss_fraction: float | None
    step_deg: float
    broadside_dbi: tuple[float, ...]
    end_on_dbi: tuple[float, ...]
    around_dbi: tuple[float, ...]
