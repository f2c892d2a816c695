"""Errors of the store. Each names the file and the way out."""

from __future__ import annotations


class StoreError(Exception):
    """Base of what can go wrong with a store file."""

    exit_code = 74


class StoreMissing(StoreError):  # noqa: N818 - named by what is the matter, as sqlite's own codes are
    """There is no store at this path."""

    exit_code = 66


class StoreBusy(StoreError):  # noqa: N818
    """Another daemon holds the store."""

    exit_code = 75


class StoreNewer(StoreError):  # noqa: N818
    """The store was written by a later version of the program."""

    exit_code = 65


class StoreForeign(StoreError):  # noqa: N818
    """The file is not one of our stores."""

    exit_code = 65


class StoreCorrupt(StoreError):  # noqa: N818
    """The file is damaged."""

    exit_code = 65


class StoreRefused(StoreError):  # noqa: N818
    """The operating system refuses access to the file or its folder."""

    exit_code = 77


class StoreFull(StoreError):  # noqa: N818
    """The disk is full, or writing failed."""

    exit_code = 74
