"""Where lines come from: followed files and standard input, as blocks of whole lines with bookmarks."""

from collections.abc import Mapping

from monitor.sources.files import FileSource
from monitor.sources.source import Block, ChainStatus, Feed, FollowFiles, ReadStandardInput, Source
from monitor.sources.streams import StreamSource

__all__ = ["Block", "ChainStatus", "Feed", "FollowFiles", "ReadStandardInput", "Source", "open_source"]


def open_source(feed: Feed, bookmarks: Mapping[str, str]) -> Source:
    """Open a feed and resume every chain at its bookmark (chain -> bookmark of its last committed block).

    Raises SourceError when a bookmark cannot be read.
    """
    if isinstance(feed, ReadStandardInput):
        return StreamSource(feed)
    return FileSource(feed, bookmarks)
