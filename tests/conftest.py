"""Makes the helpers beside this file importable from all tests; none of them is timed."""

from hypothesis import settings

settings.register_profile("untimed", deadline=None)
settings.load_profile("untimed")
