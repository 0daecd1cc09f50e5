"""Settings shared by all tests."""

from hypothesis import settings

settings.register_profile("repeatable", derandomize=True, deadline=None, max_examples=40, print_blob=False)
settings.load_profile("repeatable")
