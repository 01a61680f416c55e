"""The working half of Spanwright: engine, search, planning, and the processes that run jobs."""

import os

# One thread a process: workers fill the cores by themselves, and two processes whose linear
# algebra each takes every core run ten times slower. Set here because this file is read
# before any module below it can load numpy.
for _library in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[_library] = "1"
