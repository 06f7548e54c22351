"""Settings for all tests."""

from hypothesis import settings

# Kernels compile at their first call, and machines are shared: no test is judged by its time.
settings.register_profile("netpart", deadline=None)
settings.load_profile("netpart")
