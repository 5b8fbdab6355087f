"""Appraise: judge a plan on held-out days, for each fault the control schedule alone and with the stream's monitors beside it."""

from pbm.stages.appraise.bench import bench_of
from pbm.stages.appraise.stream import appraise_stream

__all__ = ["appraise_stream", "bench_of"]
