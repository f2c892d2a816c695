"""Tailgauge: a streaming monitor of heavy tails."""

VERSION = "0.1.0"
