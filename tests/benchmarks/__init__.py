"""Figures, each a ratio measured in one run; nothing here is asserted."""

# Read before any benchmark loads numpy: it holds linear algebra to one thread, as in a worker.
import worker as worker
