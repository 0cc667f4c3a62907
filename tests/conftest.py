"""What every test needs: one thread around the numbers, and no clock on property tests."""

from __future__ import annotations

import os

from hypothesis import settings

os.environ.setdefault("OMP_NUM_THREADS", "1")
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

settings.register_profile("shared machine", deadline=None)
settings.load_profile("shared machine")
