"""Shared set-up: reproducible hypothesis runs, and sbin on the PATH (Debian keeps its broker there)."""

import os

from hypothesis import HealthCheck, settings

settings.register_profile(
    "rigd", derandomize=True, deadline=None, max_examples=60, suppress_health_check=[HealthCheck.too_slow]
)
settings.load_profile("rigd")
os.environ["PATH"] = os.pathsep.join([os.environ.get("PATH", ""), "/usr/sbin"])
