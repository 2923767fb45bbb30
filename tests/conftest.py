"""What all tests share: steady random examples, and benchmarks left to themselves."""

from hypothesis import settings

collect_ignore = ["bench"]

# The same examples at every run; --hypothesis-profile=explore looks for new ones.
settings.register_profile("steady", deadline=None, derandomize=True)
settings.register_profile("explore", deadline=None, max_examples=1000)
settings.load_profile("steady")
