"""Where templates are read, and what they may call."""

from __future__ import annotations

import hashlib
from functools import cache
from importlib.metadata import version
from pathlib import Path
from typing import Final

from jinja2 import Environment, FileSystemLoader, StrictUndefined, select_autoescape

from service.contracts.exposure import population_in_words, standard_in_words
from service.pages import formats, wording
from service.pages.arrangement import matching_parts, pattern_rows
from service.plots import (
    impedance_plot,
    overlay_plot,
    sag_is_drawn,
    steadiness_plot,
    swr_plot,
    trade_off_plot,
    wire_plot,
)
from service.plots.looks import band_look

_HERE: Final = Path(__file__).parent
STATIC: Final = _HERE / "static"


@cache
def asset(name: str) -> str:
    """Address of a file of ours, with its content's hash so that it may be kept for long."""
    digest = hashlib.sha256((STATIC / name).read_bytes()).hexdigest()[:12]
    return f"/static/{name}?v={digest}"


@cache
def _environment() -> Environment:
    environment = Environment(
        loader=FileSystemLoader(_HERE / "templates"),
        autoescape=select_autoescape(default=True),
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    for name in formats.__all__:
        environment.filters[name] = getattr(formats, name)
    environment.globals |= {
        "asset": asset,
        "band_look": band_look,
        "product_version": version("spanwright"),
        "impedance_plot": impedance_plot,
        "matching_parts": matching_parts,
        "overlay_plot": overlay_plot,
        "pattern_rows": pattern_rows,
        "population_in_words": population_in_words,
        "sag_is_drawn": sag_is_drawn,
        "standard_in_words": standard_in_words,
        "steadiness_plot": steadiness_plot,
        "swr_plot": swr_plot,
        "trade_off_plot": trade_off_plot,
        "wire_plot": wire_plot,
        "wording": wording,
    }
    return environment


def render(template: str, **values: object) -> str:
    """Fill in a template.

    Parameters
    ----------
    template : str
        Its file name.
    **values : object
        What it shows: contract objects, as the API gives them.
    """
    return _environment().get_template(template).render(**values)
