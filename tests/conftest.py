"""Property-based tests draw the same examples on every run, and are never judged by the time they take."""

from hypothesis import settings

settings.register_profile("lengthsman", deadline=None, derandomize=True, max_examples=60)
settings.load_profile("lengthsman")
