"""Makes the helpers beside this file importable from the tests in all rooms."""
