"""What all tests share."""

import os

from hypothesis import settings

# The same examples every time where many depend on the outcome; new ones at every developer's.
settings.register_profile('repeatable', derandomize=True)
if os.environ.get('CI'):
    settings.load_profile('repeatable')
