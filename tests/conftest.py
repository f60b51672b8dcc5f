"""Stands here so that pytest puts ``tests`` on the import path: ``import brute`` works in every test."""

from hypothesis import settings

# The same examples in every run, so that a commit is green or red and not now this, now that. New ones are looked for
# with --hypothesis-profile=search.
settings.register_profile("steady", derandomize=True)
settings.register_profile("search", print_blob=True)
settings.load_profile("steady")
