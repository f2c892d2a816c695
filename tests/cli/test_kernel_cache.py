"""The cache of compiled loops is named by their sources, and never overrules what the user has named."""

from __future__ import annotations

import re

from monitor.cli.kernel_cache import VARIABLE, digest_of_sources, use_kernel_cache


def test_the_folder_is_named_by_the_sources() -> None:
    environment = {"HOME": "/home/ana"}
    use_kernel_cache(environment)
    assert environment[VARIABLE] == f"/home/ana/.cache/tailgauge/kernels-{digest_of_sources()}"
    assert re.fullmatch("[0-9a-f]{16}", digest_of_sources())


def test_a_cache_home_counts_and_a_folder_of_the_user_stays() -> None:
    environment = {"HOME": "/home/ana", "XDG_CACHE_HOME": "/var/cache/ana"}
    use_kernel_cache(environment)
    assert environment[VARIABLE].startswith("/var/cache/ana/tailgauge/kernels-")
    environment = {VARIABLE: "/elsewhere"}
    use_kernel_cache(environment)
    assert environment == {VARIABLE: "/elsewhere"}
