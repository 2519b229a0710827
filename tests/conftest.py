"""Settings of the whole test suite."""

import os

from hypothesis import settings

# A change lands or not by what it does, not by luck; at a desk the examples stay random.
settings.register_profile("ci", derandomize=True, print_blob=True, deadline=None)
settings.register_profile("desk", deadline=None)
settings.load_profile("ci" if "CI" in os.environ else "desk")
