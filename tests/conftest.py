"""Profiles of hypothesis; a cache folder of the tests' own."""

import atexit
import os
import shutil
import tempfile

from hypothesis import HealthCheck, settings

_cache = tempfile.mkdtemp(prefix="solverkit-tests-")
os.environ["XDG_CACHE_HOME"] = _cache
atexit.register(shutil.rmtree, _cache, ignore_errors=True)
settings.register_profile("dev", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.register_profile("ci", settings.get_profile("dev"), derandomize=True, print_blob=True)
settings.load_profile("ci" if os.environ.get("CI") else "dev")
