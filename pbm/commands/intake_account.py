"""The account of an intake, for a person and for a program."""

import json
from collections import Counter
from collections.abc import Iterator
from datetime import datetime
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

from pbm.commands.intake_work import Taken
from pbm.commands.tables import table
from pbm.stages.intake import Account, StreamAccount

_SHOWN = 3


def in_words(taken: Taken, history: Path, zone: ZoneInfo) -> str:
    """Rows read = taken + left out, by reason and stream; what was guessed; what to look at. Times of the laboratory's clocks."""
    account = taken.account
    parts = [
        "\n".join(_extracts(taken)),
        "\n".join(_sum(account)),
        table(
            ["stream", "taken", "in history", "censored", "first", "last"],
            [[str(name), *_stream(one, zone)] for name, one in sorted(account.streams.items())],
        ),
        f"In {history}. Every row left out, with its line and reason: {history / 'left-out.parquet'}",
        "\n".join(f"Look at this: {warning}." for warning in taken.warnings),
    ]
    return "\n\n".join(part for part in parts if part)


def as_json(taken: Taken) -> str:
    """The same for a program; times in UTC."""
    account = taken.account
    told: dict[str, Any] = {
        "rows": account.rows,
        "taken": account.taken,
        "left_out": dict(account.reasons.most_common()),
        "found": {reason: dict(texts.most_common(_SHOWN)) for reason, texts in account.found.items() if texts},
        "displaced": account.displaced,
        "extracts": {
            name: {"rows": one.rows, "taken": one.taken, "guesses": taken.guesses[name]}
            for name, one in account.extracts.items()
        },
        "passed_over": taken.passed_over,
        "streams": {
            str(name): {
                "taken": one.taken,
                "rows": one.rows,
                "censored": one.censored,
                "first": one.first.isoformat(),
                "last": one.last.isoformat(),
            }
            for name, one in sorted(account.streams.items())
        },
        "warnings": taken.warnings,
    }
    return json.dumps(told, indent=2, ensure_ascii=False)


def _extracts(taken: Taken) -> Iterator[str]:
    for name, one in taken.account.extracts.items():
        yield f"{name}: {one.rows:,} rows, {one.taken:,} taken"
        yield from (f"  {guess}" for guess in taken.guesses[name])
    yield from (f"Passed over: {reason}." for reason in taken.passed_over)


def _sum(account: Account) -> Iterator[str]:
    width = len(f"{account.rows:,}")
    yield f"rows read  {account.rows:>{width},}"
    yield f"taken      {account.taken:>{width},}"
    yield f"left out   {account.rows - account.taken:>{width},}"
    for reason, count in account.reasons.most_common():
        yield f"  {count:>{width},}  {reason}{_examples(account.found[reason])}"
    if account.displaced:
        yield f"rows taken before that gave way to earlier ones, which came only now: {account.displaced:,}"


def _examples(found: Counter[str]) -> str:
    """The texts met most often, unless every row has its own."""
    often = [f"{text[:40]} {count:,}" for text, count in found.most_common(_SHOWN) if count > 1]
    return f"  ({', '.join(often)}{', ...' if len(found) > len(often) else ''})" if often else ""


def _stream(one: StreamAccount, zone: ZoneInfo) -> list[str]:
    first, last = (_clock(time, zone) for time in (one.first, one.last))
    return [f"{one.taken:,}", f"{one.rows:,}", f"{one.censored / one.rows:.1%}", first, last]


def _clock(time: datetime, zone: ZoneInfo) -> str:
    return f"{time.astimezone(zone):%Y-%m-%d %H:%M}"
