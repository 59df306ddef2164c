"""What all tests share."""

from hypothesis import settings

from runner import threads

threads.one_each()  # as the program itself does, before anything here imports numpy

# The first example of a property pays for imports; how long it takes says nothing about the rule.
settings.register_profile("probatum", deadline=None, derandomize=True)
settings.load_profile("probatum")
