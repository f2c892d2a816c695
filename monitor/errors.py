"""Errors a user can cause. Each message says what is wrong with the value shown, where, and what to do."""

from __future__ import annotations


class MonitorError(Exception):
    """Base of the errors that end a command with a sentence and an exit code, never a traceback."""

    exit_code = 70


class UsageError(MonitorError):
    """The command line asks for something that cannot be."""

    exit_code = 2


class SettingsError(MonitorError):
    """The settings hold an unknown key, a wrong type or an impossible value."""

    exit_code = 78


class SourceError(MonitorError):
    """A place that lines should come from cannot be read."""

    exit_code = 66


class DataError(MonitorError):
    """The lines were read but are not what the command was told they are."""

    exit_code = 65


class OutputError(MonitorError):
    """A file that should be written cannot be."""

    exit_code = 73
