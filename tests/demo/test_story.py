"""The whole demonstration without a terminal: it ends, counts every line, and tells what was scripted by alarms."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from tests.service.daemon import command


@pytest.mark.slow
def test_the_fast_story_tells_both_changes_by_alarms(tmp_path: Path) -> None:
    """False failure: both changes shift the tail by more than ten standard errors within a day, and the promise
    allows 0.08 false alarms in the quiet days; the orders, and so the alarms, depend on the seed alone."""
    done = command("demo", "--fast", "--dir", "story", folder=tmp_path)
    assert done.returncode == 0, done.stderr
    text = " ".join(done.stdout.split())
    assert text.count("7 Mar 2026 18:00 UTC north: tail heavier since about 12:00 UTC") == 1
    assert "south: sizes no longer follow a power law" in text
    named = re.findall(
        r"Named by the rule ([a-z ]+)(?: \(heavier\))?, (\d+) hours and ([\d ]+) tail events later", text
    )
    (north, hours, events), (south, later, _) = named
    assert (north, south in ("fit", "rival")) == ("exponent", True)
    assert int(hours) <= 12
    assert int(later) <= 48
    assert 100 < int(events.replace(" ", "")) < 3_000
    assert "it put the change at 12:00 UTC to 18:00 UTC, which holds the true moment" in text
    assert "a shift of alpha by -0.45 seen, 9 times in 10, within" in text
    assert re.search(r"dock-days were watched: 0 alarms; promised were at most 0\.0\d+ on average", text)
    written, read = re.findall(r"([\d ]+) lines written, ([\d ]+) read", text)[0]
    assert written.strip() == read.strip()
    again = command("demo", "--fast", "--dir", "story", folder=tmp_path)
    assert again.returncode == 73
    assert "earlier story" in again.stderr
