"""Settings of the property-based tests."""

import os

from hypothesis import settings

# Continuous integration judges a change, so it tries the same examples every time; a
# developer's machine goes on looking for new ones.
settings.register_profile("continuous integration", derandomize=True)
if os.environ.get("CI"):
    settings.load_profile("continuous integration")
