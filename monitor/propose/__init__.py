"""From a sample of a log that nobody described to proposed settings, with evidence and doubts. Pure."""

from monitor.propose.proposal import propose
from monitor.propose.records import Proposal
from monitor.propose.samples import FileSample, Piece

__all__ = ["FileSample", "Piece", "Proposal", "propose"]
