"""What all tests share: hypothesis draws the same cases every time, and lets a busy machine take its time."""

from hypothesis import settings

settings.register_profile("repeatable", derandomize=True, deadline=None)
settings.load_profile("repeatable")
