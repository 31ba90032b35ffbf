"""Settings for all tests."""

from hypothesis import settings

# Machines that run the tests are shared: an example may meet a slow spell, or compile a kernel.
settings.register_profile("shared machine", deadline=None)
settings.load_profile("shared machine")
