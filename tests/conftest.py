"""What all tests share: examples that are drawn anew are the same in every run."""

from hypothesis import settings

# No deadline: the first call of a compiled function takes seconds.
settings.register_profile("same every time", derandomize=True, deadline=None, max_examples=40)
settings.load_profile("same every time")
