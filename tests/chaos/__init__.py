"""Chaos: faults at random while work goes on, and a verdict on what came of every job."""
