"""The command group, and the one place where errors become a sentence and an exit code."""

from __future__ import annotations

import os
import sys
from importlib import import_module
from typing import Any

import click

from monitor import VERSION
from monitor.cli.kernel_cache import use_kernel_cache
from monitor.errors import MonitorError
from storage.errors import StoreError

# A command's module is imported when the command is called: `tailgauge --help` must not load a compiler.
COMMANDS = {
    "demo": "monitor.cli.demo:demo",
    "propose": "monitor.cli.propose:propose_command",
    "fit": "monitor.cli.fit:fit",
    "settings": "monitor.cli.settings:settings",
    "run": "monitor.cli.run:run",
    "screen": "monitor.cli.screen:screen",
    "history": "monitor.cli.history:history",
    "check": "monitor.cli.check:check_command",
    "alarms": "monitor.cli.alarms:alarms",
    "acknowledge": "monitor.cli.acts:acknowledge",
    "shelve": "monitor.cli.acts:shelve",
    "unshelve": "monitor.cli.acts:unshelve",
    "out-of-service": "monitor.cli.acts:out_of_service",
    "in-service": "monitor.cli.acts:in_service",
    "note": "monitor.cli.acts:note",
    "decide": "monitor.cli.acts:decide",
    "baseline": "monitor.cli.alarms:baseline",
    "promise": "monitor.cli.promise:promise_command",
    "rehearse": "monitor.cli.rehearse:rehearse",
}
INTERRUPTED = 130
INTERNAL = 70
IO_FAILED = 74


class Commands(click.Group):
    """The commands of the table above, each loaded on its first use."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        target = COMMANDS.get(cmd_name)
        if target is None:
            return None
        module, _, name = target.partition(":")
        command = getattr(import_module(module), name)
        assert isinstance(command, click.Command)
        return command


@click.group(cls=Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(VERSION, prog_name="tailgauge")
def group() -> None:
    """Watch live event logs, and be told when the heavy tail of event sizes is no longer the planned one."""


def main(arguments: list[str] | None = None) -> None:
    """Run the command line and exit: 0 done, else the code of the contract in the README."""
    use_kernel_cache()
    sys.exit(run_command(sys.argv[1:] if arguments is None else arguments))


def run_command(arguments: list[str]) -> int:
    """Run one command; every error a user can cause becomes one message and an exit code, never a traceback."""
    try:
        outcome: Any = group.main(args=arguments, prog_name="tailgauge", standalone_mode=False)
        sys.stdout.flush()
        return outcome if isinstance(outcome, int) else 0
    except click.ClickException as error:
        error.show(sys.stderr)
        return error.exit_code
    except (click.Abort, KeyboardInterrupt):
        say("interrupted")
        return INTERRUPTED
    except (MonitorError, StoreError) as error:
        say(str(error))
        return error.exit_code
    except BrokenPipeError:
        # The reader of our output went away (a pager was left, `head` had enough): no error of ours.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except OSError as error:
        where = f"{error.filename}: " if error.filename else ""
        say(f"{where}{error.strerror or error}")
        return IO_FAILED
    except Exception as error:
        if os.environ.get("TAILGAUGE_TRACEBACK"):
            raise
        say(f"internal error ({type(error).__name__}: {error}). Set TAILGAUGE_TRACEBACK=1 and report what it prints.")
        return INTERNAL


def say(message: str) -> None:
    """One message for people, on standard error."""
    click.echo(f"tailgauge: {message}", err=True)
