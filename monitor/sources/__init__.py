"""Where lines come from: followed files, standard input, sockets; as blocks of whole lines with bookmarks."""

from collections.abc import Mapping

from monitor.sources.files import FileSource
from monitor.sources.http_lines import HttpSource
from monitor.sources.sockets import LineSocketSource
from monitor.sources.source import (
    Answering,
    Block,
    ChainStatus,
    Feed,
    FollowFiles,
    ListenForBatches,
    ListenForLines,
    Moments,
    ReadStandardInput,
    Source,
)
from monitor.sources.streams import StreamSource

__all__ = [
    "Answering",
    "Block",
    "ChainStatus",
    "Feed",
    "FollowFiles",
    "ListenForBatches",
    "ListenForLines",
    "Moments",
    "ReadStandardInput",
    "Source",
    "open_source",
]


def open_source(feed: Feed, bookmarks: Mapping[str, str], moments: Moments | None = None) -> Source:
    """Open a feed and resume every chain at its bookmark (chain -> bookmark of its last committed block).

    Parameters: moments, the clock; only listening needs it.
    Raises SourceError when a bookmark cannot be read, or an address cannot be listened on.
    """
    if isinstance(feed, ReadStandardInput):
        return StreamSource(feed)
    if isinstance(feed, FollowFiles):
        return FileSource(feed, bookmarks)
    if moments is None:
        raise ValueError("listening needs a clock")
    if isinstance(feed, ListenForBatches):
        return HttpSource(feed, bookmarks.get(feed.address), moments)
    return LineSocketSource(feed, bookmarks.get(feed.address), moments)
