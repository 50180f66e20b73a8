"""Settings of the property tests: how long an example takes says nothing here, so it has no deadline."""

from hypothesis import settings

settings.register_profile("finback", deadline=None)
settings.load_profile("finback")
