"""Before any test imports the compiler: its cache must not hold code of older sources."""

from monitor.cli.kernel_cache import use_kernel_cache

use_kernel_cache()
