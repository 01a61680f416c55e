"""Plots as SVG, in the page or beside it, from stored figures: only where ink goes is computed."""

from service.plots.hung_wire import current_plot, sag_is_drawn, wire_plot
from service.plots.impedance import impedance_plot
from service.plots.overlay import overlay_plot
from service.plots.pattern import pattern_plot
from service.plots.smith_chart import smith_plot
from service.plots.standing_wave import swr_plot
from service.plots.steadiness import steadiness_plot
from service.plots.sweep import sweep_plot
from service.plots.trade_off import trade_off_plot

__all__ = [
    "current_plot",
    "impedance_plot",
    "overlay_plot",
    "pattern_plot",
    "sag_is_drawn",
    "smith_plot",
    "steadiness_plot",
    "sweep_plot",
    "swr_plot",
    "trade_off_plot",
    "wire_plot",
]
