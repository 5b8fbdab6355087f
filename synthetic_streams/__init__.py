"""The invented Tern Bay District Laboratory: histories, live messages and faults whose truth is known. Needs numpy only."""

from synthetic_streams.faults import Fault
from synthetic_streams.laboratory import Laboratory, StreamSample, stream_sample
from synthetic_streams.write import Summary, default_faults, live_start, write_laboratory

__all__ = [
    "Fault",
    "Laboratory",
    "StreamSample",
    "Summary",
    "default_faults",
    "live_start",
    "stream_sample",
    "write_laboratory",
]
