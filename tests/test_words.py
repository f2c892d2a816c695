"""The documents and the program agree: commands, help, settings, top level."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest

from monitor.cli.main import COMMANDS
from monitor.plan import STARTER, read_plan

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")


def tailgauge(*arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "monitor", *arguments], capture_output=True, text=True, cwd=ROOT, check=False
    )


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_is_in_the_readme_and_has_help(command: str) -> None:
    assert f"tailgauge {command}" in README
    done = tailgauge(command, "--help")
    assert done.returncode == 0
    assert len(done.stdout.splitlines()) > 4


def test_the_readme_has_its_two_commands_on_one_line_each() -> None:
    lines = README.splitlines()
    assert sum(line.startswith("python3 -m venv") and line.endswith("tailgauge demo") for line in lines) == 1
    assert sum(line.startswith("python3 -m venv") and line.endswith("pytest") for line in lines) == 1


def test_every_long_option_in_the_readme_exists() -> None:
    for command, options in re.findall(r"^.*tailgauge (\w+)((?: [^#\n]*)?)", README, flags=re.M):
        if command in COMMANDS:
            known = tailgauge(command, "--help").stdout
            for option in re.findall(r"--[a-z-]+", options):
                assert option in known, f"{command} {option}"


def test_the_starter_file_is_a_valid_plan() -> None:
    plan = read_plan(STARTER, "starter")
    assert plan.feeds[0].name == "orders"
    assert tailgauge("settings").stdout == STARTER


def test_the_starter_with_every_comment_lifted_is_a_valid_plan() -> None:
    lifted = re.sub(r"^# (where|scale|timezone|limit|limit_at_most|\[stream|alpha|xmin)", r"\1", STARTER, flags=re.M)
    plan = read_plan(lifted, "starter")
    assert plan.stream("north-dock", "units").planned is not None
    assert plan.everywhere.limit == 6000


def test_the_top_level_holds_what_it_should() -> None:
    out = subprocess.run(["git", "ls-files"], capture_output=True, text=True, cwd=ROOT, check=True).stdout
    top = {line.split("/")[0] for line in out.splitlines()}
    allowed = {"README.md", "DEVELOPERS.md", "pyproject.toml", "monitor", "storage", "tests", "demo", "LICENSE"}
    assert {name for name in top if not name.startswith(".")} <= allowed
