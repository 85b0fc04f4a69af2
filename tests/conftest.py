"""Settings of all tests."""

from hypothesis import settings

# first calls compile kernels, and shared machines stall: the time of one example says nothing
settings.register_profile("earthwork", deadline=None)
settings.load_profile("earthwork")
