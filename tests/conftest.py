"""Settings of the whole test suite."""

import os

from hypothesis import HealthCheck, settings

# A change lands or not by what it does, not by luck; at a desk the examples stay random.
slow_machine = {"deadline": None, "suppress_health_check": [HealthCheck.too_slow]}
settings.register_profile("ci", derandomize=True, print_blob=True, **slow_machine)
settings.register_profile("desk", **slow_machine)
settings.load_profile("ci" if "CI" in os.environ else "desk")
