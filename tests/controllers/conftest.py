"""Property-based tests here draw the same examples on every run, and are never judged by the time they take."""

from hypothesis import settings

settings.register_profile("controllers", deadline=None, derandomize=True, max_examples=60)
settings.load_profile("controllers")
