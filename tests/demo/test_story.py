"""The whole demonstration without a terminal: it ends, counts every line, and sees what was scripted."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from tests.service.daemon import command


@pytest.mark.slow
def test_the_fast_story_sees_both_changes(tmp_path: Path) -> None:
    """False failure: the scripted changes shift the tail by more than ten standard errors; less than 1e-9."""
    done = command("demo", "--fast", "--dir", "story", folder=tmp_path)
    assert done.returncode == 0, done.stderr
    text = " ".join(done.stdout.split())
    north, south = re.findall(r"Flagged by the refit of (\S+ \S+ \S+ \S+) UTC", text)
    assert north.startswith(("7 Mar", "8 Mar"))
    assert south.startswith(("8 Mar", "9 Mar", "10 Mar"))
    written, read = re.findall(r"([\d ]+) lines written, ([\d ]+) read", text)[0]
    assert written.strip() == read.strip()
    again = command("demo", "--fast", "--dir", "story", folder=tmp_path)
    assert again.returncode == 73
    assert "earlier story" in again.stderr
