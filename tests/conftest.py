"""What holds for every test: property tests try the same examples each time, so that a run tells of the code alone."""

from hypothesis import settings

settings.register_profile("fixed", derandomize=True)
settings.load_profile("fixed")
