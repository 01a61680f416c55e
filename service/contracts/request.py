"""The design request: everything a planner says, with limits on all of it."""

from __future__ import annotations

import hashlib
import math
from typing import Annotated, Final, Literal, Self

from pydantic import Field, StringConstraints, ValidationError, field_validator, model_validator

from service.contracts.bands import MOST_BANDS, Band, check_names_differ, expand_bands
from service.contracts.exposure import ExposureTerms
from service.contracts.feed import Feed
from service.contracts.hanging import Hanging
from service.contracts.quantities import Contract, LengthM, PowerW, wavelength_m
from service.contracts.refusals import refusal_of, rule_broken
from service.contracts.station_site import Site
from service.contracts.stock import Stock

MOST_CANDIDATES: Final = 15
LARGEST_SET: Final = 4
#: Conductors times heights times places of the feed that one request may search.
MOST_WAYS: Final = 15
#: A wire for the highest band must still be long enough for the models on the lowest.
WIDEST_RANGE_RATIO: Final = 60
LARGEST_REQUEST_BYTES: Final = 64 * 1024

#: No straight wire resonates below this many wavelengths: even a wire only 10 diameters
#: long has its first resonance at 0.467 λ, 25 diameters at 0.459 λ (minimum), thinner wire
#: above (numerical solution of Hallén's equation with the exact kernel). Height over ground
#: and insulation shorten it by a few per cent more, hence the margin.
SHORTEST_RESONANCE_WAVELENGTHS: Final = 0.40

#: Heights the models of the ground cover, in wavelengths of the lowest and the highest band.
LOWEST_HEIGHT_WAVELENGTHS: Final = 0.01
HIGHEST_HEIGHT_WAVELENGTHS: Final = 90.0

#: Above this radius in wavelengths the current is no longer that of a thin wire.
THICKEST_RADIUS_WAVELENGTHS: Final = 5e-3


class Tolerances(Contract):
    """How far the wire as hung may differ from the wire as planned.

    The result is judged with the wire ``cutting_percent`` longer and shorter, ``height_m``
    higher and lower, over ground ``ground_factor`` times wetter and drier (conductivity;
    permittivity by its square root), and with insulation of ``insulation_percent`` more and
    less permittivity.
    """

    cutting_percent: Annotated[float, Field(ge=0.0, le=5.0)] = 1.0
    height_m: Annotated[float, Field(ge=0.0, le=20.0)] = 0.5
    ground_factor: Annotated[float, Field(ge=1.0, le=10.0)] = 2.0
    insulation_percent: Annotated[float, Field(ge=0.0, le=50.0)] = 10.0


class LengthBounds(Contract):
    """Lengths of wire to search: between two limits, or one alone where they are equal."""

    low_m: LengthM
    high_m: LengthM

    @model_validator(mode="after")
    def _limits_are_in_order(self) -> Self:
        if self.low_m > self.high_m:
            raise rule_broken(
                "lengths-swapped",
                f"the low length {self.low_m:g} m is above the high one {self.high_m:g} m.",
                "Swap the lengths.",
                field="low_m",
                value=self.low_m,
            )
        return self


class DesignRequest(Contract):
    """What a planner wants designed.

    ``bands`` accepts objects with edges, objects that name a ready-made list, and texts
    such as ``amateur-region-2: 40m, 15m``; they are stored as bands with edges.
    ``largest_set`` asks for sets of up to so many dipoles; without it sets are proposed only
    where no single wire serves all required bands. ``rank_by`` of ``worst-case`` ranks by how
    wires hold up under the ``tolerances``. ``lengths`` bounds the lengths searched, within what
    the site can take. ``hanging`` and ``exposure`` change no ranking: they say what a report
    tells of sag and strength, and of how far people must stay away. ``purchase_reference`` is the
    buyer's own and comes back on the bill of materials.
    """

    name: Annotated[str, StringConstraints(strip_whitespace=True, max_length=120)] = (
        "Unnamed design"
    )
    bands: Annotated[tuple[Band, ...], Field(min_length=1, max_length=MOST_BANDS)]
    site: Site
    stock: Stock
    feed: Feed = Feed()
    power_w: PowerW = 100.0
    candidates: Annotated[int, Field(ge=1, le=MOST_CANDIDATES)] = 5
    largest_set: Annotated[int, Field(ge=1, le=LARGEST_SET)] | None = None
    rank_by: Literal["nominal", "worst-case"] = "nominal"
    tolerances: Tolerances | None = Tolerances()
    lengths: LengthBounds | None = None
    hanging: Hanging = Hanging()
    exposure: ExposureTerms = ExposureTerms()
    purchase_reference: Annotated[str, StringConstraints(max_length=64)] = ""

    @field_validator("bands", mode="before")
    @classmethod
    def _bands_from_lists(cls, given: object) -> object:
        return expand_bands(given)

    @model_validator(mode="after")
    def _hangs_together(self) -> Self:
        check_names_differ(self.bands)
        self._check_span()
        self._check_lengths()
        self._check_heights()
        self._check_rise()
        self._check_diameters()
        self._check_size()
        self._check_worst_case()
        self._check_bands_together()
        return self

    def _check_bands_together(self) -> None:
        lowest = min(self.bands, key=lambda band: band.low_mhz)
        highest = max(self.bands, key=lambda band: band.high_mhz)
        if highest.high_mhz > WIDEST_RANGE_RATIO * lowest.low_mhz:
            raise rule_broken(
                "bands-too-far-apart",
                f"{highest.name} is {highest.high_mhz / lowest.low_mhz:.0f} times as high as "
                f"{lowest.name}; a wire for the one is no antenna on the other.",
                f"Plan bands within a ratio of {WIDEST_RANGE_RATIO} together, the others by "
                "themselves.",
                field="bands",
                value=f"{lowest.name} and {highest.name}",
            )

    def _check_size(self) -> None:
        counts = {
            "conductors": len(self.stock.choices()),
            "heights": max(1, len(self.site.heights_m())),
            "places of the feed": len(self.feed.feed_fractions()),
        }
        ways = math.prod(counts.values())
        if ways > MOST_WAYS:
            said = ", ".join(f"{number} {name}" for name, number in counts.items())
            raise rule_broken(
                "too-many-ways",
                f"{said} make {ways} ways to hang the wire.",
                f"Choose among at most {MOST_WAYS} ways: fewer conductors, heights or places.",
                field="stock",
                value=f"{ways} ways",
            )

    def _check_worst_case(self) -> None:
        if self.rank_by == "worst-case" and self.tolerances is None:
            raise rule_broken(
                "tolerances-missing",
                "the worst case needs tolerances.",
                "Give tolerances, or rank by the nominal wire.",
                field="tolerances",
                value="",
            )

    def _check_span(self) -> None:
        highest = max(self.bands, key=lambda band: band.high_mhz)
        needed_m = SHORTEST_RESONANCE_WAVELENGTHS * wavelength_m(highest.high_mhz)
        if self.site.longest_wire_m < needed_m:
            raise rule_broken(
                "span-too-short",
                f"a wire of at most {self.site.longest_wire_m:.2f} m fits the span, and even "
                f"{highest.name} at {highest.high_mhz:g} MHz has no resonance below "
                f"{needed_m:.2f} m.",
                f"Give a span of at least {needed_m + 2 * self.site.end_allowance_m:.2f} m "
                "or add a higher band.",
                field="site.span_m",
                value=self.site.span_m,
            )

    def _check_lengths(self) -> None:
        if self.lengths is None:
            return
        if self.lengths.low_m > self.site.longest_wire_m:
            raise rule_broken(
                "lengths-beyond-span",
                f"a wire of {self.lengths.low_m:g} m does not fit: the span takes at most "
                f"{self.site.longest_wire_m:.2f} m.",
                "Give a longer site.span_m or shorter lengths.",
                field="lengths.low_m",
                value=self.lengths.low_m,
            )
        highest = max(self.bands, key=lambda band: band.high_mhz)
        needed_m = SHORTEST_RESONANCE_WAVELENGTHS * wavelength_m(highest.high_mhz)
        if self.lengths.high_m < needed_m:
            raise rule_broken(
                "lengths-too-short",
                f"even {highest.name} at {highest.high_mhz:g} MHz has no resonance below "
                f"{needed_m:.2f} m of wire.",
                f"Let lengths reach to at least {math.ceil(100.0 * needed_m) / 100.0:.2f} m, or "
                "add a higher band.",
                field="lengths.high_m",
                value=self.lengths.high_m,
            )

    def _check_heights(self) -> None:
        heights_m = self.site.heights_m()
        if not heights_m:
            return
        lowest = min(self.bands, key=lambda band: band.low_mhz)
        highest = max(self.bands, key=lambda band: band.high_mhz)
        least_m = LOWEST_HEIGHT_WAVELENGTHS * wavelength_m(lowest.low_mhz)
        most_m = HIGHEST_HEIGHT_WAVELENGTHS * wavelength_m(highest.high_mhz)
        if min(heights_m) < least_m:
            raise rule_broken(
                "height-too-low",
                f"a wire {min(heights_m):g} m over ground is too low for the model of the ground "
                f"on {lowest.name}.",
                f"Hang it at least {math.ceil(100.0 * least_m) / 100.0:.2f} m high, or leave out "
                "the lowest band.",
                field="site.height_m",
                value=min(heights_m),
            )
        if max(heights_m) > most_m:
            raise rule_broken(
                "height-too-high",
                f"a wire {max(heights_m):g} m over ground is too high for the model of the ground "
                f"on {highest.name}.",
                f"Plan it at {math.floor(100.0 * most_m) / 100.0:.2f} m, where it is as good as "
                "in free space, or leave out the highest band.",
                field="site.height_m",
                value=max(heights_m),
            )

    def _check_rise(self) -> None:
        rise_m = self.hanging.rise_m
        most_m = min((0.5 * self.site.span_m, *(2.0 * each for each in self.site.heights_m())))
        if abs(rise_m) > most_m:
            raise rule_broken(
                "rise-too-steep",
                f"supports of {rise_m:g} m difference do not suit a span of "
                f"{self.site.span_m:g} m at its height.",
                f"Give a rise of at most {most_m:g} m: half the span, and twice the height.",
                field="hanging.rise_m",
                value=rise_m,
            )

    def _check_diameters(self) -> None:
        top_mhz = max(band.high_mhz for band in self.bands)
        limit_mm = 2e3 * THICKEST_RADIUS_WAVELENGTHS * wavelength_m(top_mhz)
        for index, conductor in enumerate(self.stock.choices()):
            thick = conductor.insulation.thickness_mm if conductor.insulation else 0.0
            outer_mm = conductor.bare_diameter_mm + 2.0 * thick
            if outer_mm > limit_mm:
                listed = self.stock.diameter_range is None
                raise rule_broken(
                    "diameter-breaks-thin-wire",
                    f"an outer diameter of {outer_mm:.2f} mm is too thick for the thin-wire "
                    f"model at {top_mhz:g} MHz.",
                    f"Take at most {limit_mm:.2f} mm over all, or leave out the highest band.",
                    field=f"stock.conductors[{index}]"
                    if listed
                    else "stock.diameter_range.high_mm",
                    value=f"{outer_mm:.2f} mm",
                )

    def canonical_json(self) -> str:
        """The request as stored: every default written out, one spelling for equal requests."""
        return self.model_dump_json()

    def content_hash(self) -> str:
        """SHA-256 of the canonical form, in hexadecimal."""
        return hashlib.sha256(self.canonical_json().encode()).hexdigest()


def parse_request(text: str | bytes) -> DesignRequest:
    """Read a design request from JSON.

    Raises
    ------
    RequestRefused
        With one fault for each thing wrong: field, value, reason and remedy.
    """
    refuse_too_long(text)
    try:
        return DesignRequest.model_validate_json(text)
    except ValidationError as error:
        raise refusal_of(error) from error


def refuse_too_long(text: str | bytes) -> None:
    """Refuse a text that is longer than any request may be, before it is read.

    Raises
    ------
    RequestRefused
    """
    if len(text) <= LARGEST_REQUEST_BYTES:
        return
    error = rule_broken(
        "request-too-large",
        f"the request is longer than {LARGEST_REQUEST_BYTES // 1024} KiB.",
        "Split it into several requests.",
        value=f"{len(text)} bytes",
    )
    raise refusal_of(
        ValidationError.from_exception_data(
            "DesignRequest", [{"type": error, "loc": (), "input": f"{len(text)} bytes"}]
        )
    )
