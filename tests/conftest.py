"""Settings of all tests: properties are checked on the same examples every time."""

from hypothesis import settings

# A shared machine may be slow at any moment, so that no example has a time limit.
settings.register_profile("repeatable", derandomize=True, deadline=None)
settings.load_profile("repeatable")
