"""What the package offers, and what importing it costs."""

from __future__ import annotations

import subprocess
import sys

import pytest

import monitor.tail


def test_every_public_name_is_there():
    for name in monitor.tail.__all__:
        assert getattr(monitor.tail, name).__module__.startswith("monitor.tail.")
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = monitor.tail.nothing


def test_importing_the_judge_does_not_load_the_compiler():
    code = "import sys, monitor.tail.judge; print('numba' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"
