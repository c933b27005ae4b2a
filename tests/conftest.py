"""Makes the helpers beside this file importable from all tests; none of them is timed.

Where CI is set in the environment the same examples are drawn each time; elsewhere new ones, which
is how most faults were found.
"""

import os

from hypothesis import settings

settings.register_profile("untimed", deadline=None, derandomize=bool(os.environ.get("CI")))
settings.load_profile("untimed")
