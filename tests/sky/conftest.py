"""A busy machine must not fail a test: examples of this room have no deadline."""

from hypothesis import settings

settings.register_profile("no deadline", deadline=None)
settings.load_profile("no deadline")
