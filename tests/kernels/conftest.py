"""Property tests without a time limit an example: a busy machine is no failure of the code."""

from hypothesis import settings

settings.register_profile("no-deadline", deadline=None)
settings.load_profile("no-deadline")
