"""Straight thin wire: feed impedance and current by a Galerkin solution."""

from worker.engine.thin_wire.reflection import ReflectedPotentials

__all__ = ["ReflectedPotentials"]
