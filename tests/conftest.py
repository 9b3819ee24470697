"""One thread a process: the systems are small, and threads that wait for a busy core are slow."""

import os

os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
