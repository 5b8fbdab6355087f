"""The account of an intake: rows read = rows taken + rows left out, by reason, by stream, by extract. Nothing silent."""

from collections import Counter, defaultdict
from collections.abc import Collection
from dataclasses import dataclass, field
from datetime import datetime

import pyarrow as pa
import pyarrow.compute as pc

from pbm.records.intake import ParsedBlock, Sifted
from pbm.records.stream import StreamName

_DIFFERENT = 1000  # different texts remembered for one reason


@dataclass
class StreamAccount:
    """What the history holds of one stream: rows taken now, all rows, how many of them are censored, first and last time."""

    taken: int
    rows: int
    censored: int
    first: datetime
    last: datetime


@dataclass
class ExtractAccount:
    """Rows of one extract."""

    rows: int = 0
    left_out: int = 0

    @property
    def taken(self) -> int:
        """Rows that are in the history now."""
        return self.rows - self.left_out


@dataclass
class Account:
    """What became of the rows of some extracts.

    Attributes
    ----------
    extracts
        By name.
    reasons
        Reason -> rows left out for it.
    found
        Reason -> the texts that were found most often, with counts.
    streams
        The streams that got rows.
    displaced
        Rows of earlier extracts that gave way to a row that came only now.
    """

    extracts: dict[str, ExtractAccount] = field(default_factory=lambda: defaultdict(ExtractAccount))
    reasons: Counter[str] = field(default_factory=Counter)
    found: dict[str, Counter[str]] = field(default_factory=lambda: defaultdict(Counter))
    streams: dict[StreamName, StreamAccount] = field(default_factory=dict)
    displaced: int = 0
    _came: Counter[StreamName] = field(default_factory=Counter)

    @property
    def rows(self) -> int:
        """Rows read."""
        return sum(one.rows for one in self.extracts.values())

    @property
    def taken(self) -> int:
        """Rows that are in the history now."""
        return sum(one.taken for one in self.extracts.values())

    def add_block(self, name: str, block: ParsedBlock) -> None:
        """Count a block of an extract."""
        self.extracts[name].rows += len(block.results) + len(block.left_out)
        self._came.update(dict(block.streams))
        self._leave_out(block.left_out)

    def add_stream(self, name: StreamName, sifted: Sifted) -> None:
        """Count a stream after sifting, when all blocks are counted."""
        own = pc.is_in(sifted.left_out["file"], pa.array(list(self.extracts), pa.string()))
        left_out = sifted.left_out.filter(own)
        self.displaced += len(sifted.left_out) - len(left_out)
        self._leave_out(left_out)
        times = pc.min_max(sifted.results["time"])
        self.streams[name] = StreamAccount(
            taken=self._came[name] - len(left_out),
            rows=len(sifted.results),
            censored=pc.sum(pc.not_equal(sifted.results["censor"], 0)).as_py(),
            first=times["min"].as_py(),
            last=times["max"].as_py(),
        )

    def _leave_out(self, rows: pa.Table) -> None:
        for file, count in _counted(rows["file"]):
            self.extracts[file].left_out += count
        for reason, count in _counted(rows["reason"]):
            self.reasons[reason] += count
            self._remember(self.found[reason], rows.filter(pc.equal(rows["reason"], reason))["found"])

    def _remember(self, seen: Counter[str], texts: pa.ChunkedArray) -> None:
        for text, count in _counted(texts):
            if text and (text in seen or len(seen) < _DIFFERENT):
                seen[text] += count


def warnings(account: Account, pooled: bool) -> list[str]:
    """What a person should look at before using the history."""
    told = []
    if pooled:
        told.append(
            "analysers pooled: lab.toml names no extract.analyser, so an error of one analyser is diluted by the others"
        )
    if account.taken < account.rows / 2 and account.reasons:
        reason, count = account.reasons.most_common(1)[0]
        told.append(f"more than half of the rows were left out, {count:,} of {account.rows:,} as: {reason}")
    for name, stream in account.streams.items():
        if stream.censored > stream.rows / 10:
            told.append(f"{name}: {stream.censored / stream.rows:.0%} of the results are censored (<, >)")
    return told


def _counted(texts: pa.ChunkedArray) -> Collection[tuple[str, int]]:
    counts = pc.value_counts(texts.combine_chunks() if isinstance(texts, pa.ChunkedArray) else texts)
    return list(zip(counts.field("values").to_pylist(), counts.field("counts").to_pylist(), strict=True))
