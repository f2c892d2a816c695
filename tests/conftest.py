"""Before any test: the compiler's cache must not hold code of older sources, and random examples are repeatable."""

from hypothesis import settings

from monitor.cli.kernel_cache import use_kernel_cache

use_kernel_cache()
# The examples depend on the test alone; a slow machine is no failure.
settings.register_profile("repeatable", derandomize=True, deadline=None, print_blob=True)
settings.load_profile("repeatable")
