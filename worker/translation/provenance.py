"""How a result was found, for the report: model, ground, errors, and what is left out."""

from __future__ import annotations

from service.contracts.formats import metres
from service.contracts.report import Provenance
from service.contracts.request import DesignRequest
from service.contracts.station_site import Ground as SaidGround
from service.contracts.stock import material_in_words
from worker.engine import ENGINE_VERSION
from worker.engine.thin_wire import MODEL
from worker.search.appraisal import Appraisal
from worker.search.space import SearchSpace
from worker.translation.wires import Way, ground_of
from worker.translation.wording import NOT_MODELLED


def provenance_of(request: DesignRequest, way: Way, appraisal: Appraisal) -> Provenance:
    """The provenance of one candidate's report."""
    conductor = way.conductor
    insulated = "bare" if conductor.insulation is None else "insulated"
    return Provenance(
        engine_version=ENGINE_VERSION,
        model=MODEL,
        source_gap_mm=0.5 * conductor.bare_diameter_mm,
        ground=ground_and_height_in_words(request.site.ground, way.height_m),
        conductor_loss=f"{insulated} {material_in_words(conductor.material)} at 20 °C",
        largest_error_ohm=max(band.error_ohm for band in appraisal.bands),
        map_error_percent=100.0 * appraisal.largest_miss,
        not_modelled=NOT_MODELLED,
    )


def ground_in_words(request: DesignRequest) -> str:
    """The ground of a request's site and the heights searched, as a report names them."""
    heights = request.site.heights_m()
    if len(heights) < 2:
        return ground_and_height_in_words(request.site.ground, heights[0] if heights else None)
    low, high = metres(min(heights)), metres(max(heights))
    words = ground_and_height_in_words(request.site.ground, heights[0])
    return f"{low} to {high} m over{words.partition(' over')[2]}"


def ground_and_height_in_words(said: SaidGround, height_m: float | None) -> str:
    """A ground and the height over it, as a report names them."""
    ground = ground_of(said)
    if ground is None or height_m is None:
        return "free space"
    height = f"{metres(height_m)} m over"
    if ground.is_perfect:
        return f"{height} perfect ground"
    return (
        f"{height} ground {ground.name}: relative permittivity "
        f"{ground.relative_permittivity:g}, conductivity {ground.conductivity_s_per_m:g} S/m"
    )


def notes_on(request: DesignRequest, space: SearchSpace) -> tuple[str, ...]:
    """What a planner should know of the search as a whole."""
    notes: list[str] = []
    lengths = request.lengths
    wanted_m = space.site_longest_m if lengths is None else lengths.high_m
    if space.longest_m < min(wanted_m, space.site_longest_m):
        top = max(request.bands, key=lambda band: band.high_mhz)
        notes.append(
            f"Wires longer than {metres(space.longest_m)} m were not searched: on {top.name} they "
            "are longer than the model covers. Leave that band out to search them."
        )
    if lengths is not None:
        low, high = metres(lengths.low_m), metres(lengths.high_m)
        between = f"of {low} m" if low == high else f"from {low} to {high} m"
        notes.append(f"Only wires {between} were searched, as asked.")
    if request.feed.matching == "per-band":
        notes.append(
            "Each band has an L-network of its own at the feed point, matched at the band's "
            "centre and switched with the band; a coil's loss at a Q of 200 is in its report."
        )
    return tuple(notes)
