"""Where compiled loops are cached: a folder named by a digest of their sources.

The compiler itself notices a change only in the file of the loop that is asked for, not in the loops inside it; after
an update old code could then run. With the sources in the folder's name that cannot happen.
"""

from __future__ import annotations

import os
import platform
from collections.abc import MutableMapping
from hashlib import blake2b
from importlib.metadata import version
from pathlib import Path

VARIABLE = "NUMBA_CACHE_DIR"
_PACKAGE = Path(__file__).resolve().parent.parent
_KERNELS = (_PACKAGE / "tail" / "kernels", _PACKAGE / "parse" / "kernels")


def use_kernel_cache(environment: MutableMapping[str, str] | None = None) -> None:
    """Name the cache folder for this process and its children, unless the user has named one.

    To be called before anything imports the compiler. A folder that cannot be written is passed over by it.
    """
    environment = os.environ if environment is None else environment
    if VARIABLE in environment:
        return
    home = environment.get("XDG_CACHE_HOME") or str(Path(environment.get("HOME", "/nonexistent")) / ".cache")
    environment[VARIABLE] = str(Path(home) / "tailgauge" / f"kernels-{digest_of_sources()}")


def digest_of_sources() -> str:
    """Eight bytes of BLAKE2b over the sources of all compiled loops, the compiler's version and the machine's kind."""
    found = blake2b(digest_size=8)
    for name in (version("numba"), version("numpy"), platform.python_version(), platform.machine()):
        found.update(name.encode())
    for folder in _KERNELS:
        for path in sorted(folder.glob("*.py")):
            found.update(path.name.encode() + path.read_bytes())
    return found.hexdigest()
