"""The worker: plans designs; the numerics of the house live below it."""
