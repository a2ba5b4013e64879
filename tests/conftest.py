"""Puts this folder and its `bench` on the path, so that tests can share modules: importlib mode leaves them off."""

import os
import sys
from pathlib import Path

from hypothesis import settings

HERE = Path(__file__).parent

sys.path[:0] = [str(HERE), str(HERE / "bench")]

# Threads of the linear algebra library gain nothing on small matrices and wait for each other beside other work.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")

# A run that decides something is the same run each time; by hand, new examples are tried each time.
settings.register_profile("ci", derandomize=True)
if os.environ.get("CI"):
    settings.load_profile("ci")
