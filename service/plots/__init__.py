"""Plots as inline SVG, drawn from stored figures: nothing computed but where ink goes."""

from service.plots.impedance import impedance_plot
from service.plots.standing_wave import swr_plot
from service.plots.steadiness import steadiness_plot
from service.plots.sweep import sweep_plot
from service.plots.trade_off import trade_off_plot

__all__ = ["impedance_plot", "steadiness_plot", "sweep_plot", "swr_plot", "trade_off_plot"]
