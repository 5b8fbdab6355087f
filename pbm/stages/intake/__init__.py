"""Intake: rows of text -> results by stream in order of time, and every row left out with its reason. No file, no printing."""

from pbm.stages.intake.account import Account, ExtractAccount, StreamAccount, warnings
from pbm.stages.intake.rows import RowReader
from pbm.stages.intake.sift import sift

__all__ = ["Account", "ExtractAccount", "RowReader", "StreamAccount", "sift", "warnings"]
