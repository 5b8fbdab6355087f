"""Tests assert behaviour, never elapsed time: hypothesis sets no deadline."""

from hypothesis import settings

settings.register_profile("house", deadline=None)
settings.load_profile("house")
