"""Recordings: EDF, BDF, FIF, BrainVision, Parquet and delimited files become signals and digests of their content."""

from __future__ import annotations

from bandcairn.recordings.content import ChannelContent, FileContent, content_digests
from bandcairn.recordings.declared import MAX_MISSING_SHARE, Declared
from bandcairn.recordings.edf import check_repair
from bandcairn.recordings.index import RawIndex, Surveyed
from bandcairn.recordings.raw import RawSignal
from bandcairn.recordings.reading import SUFFIXES, inspect, parts_of, read
from bandcairn.recordings.surveying import survey

__all__ = [
    "MAX_MISSING_SHARE",
    "SUFFIXES",
    "ChannelContent",
    "Declared",
    "FileContent",
    "RawIndex",
    "RawSignal",
    "Surveyed",
    "check_repair",
    "content_digests",
    "inspect",
    "parts_of",
    "read",
    "survey",
]
