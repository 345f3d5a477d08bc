"""Profiles of hypothesis; a missing part fails."""

import os

from hypothesis import HealthCheck, settings

settings.register_profile("dev", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.register_profile("ci", settings.get_profile("dev"), derandomize=True, print_blob=True)
settings.load_profile("ci" if os.environ.get("CI") else "dev")
