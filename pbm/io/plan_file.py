"""`plan.toml` <-> the plan: nested as people read it, floats exact, written whole or not at all."""

import hashlib
from pathlib import Path
from typing import Any

import tomlkit
from tomlkit.items import AoT, InlineTable, Table

from pbm.errors import PlanError
from pbm.io.atomic import replace_file
from pbm.io.mistakes import read_written, written_bytes
from pbm.records.plan import Made, MonitorPlan, Plan, StreamPlan

_HEAD = "Written by `pbm tune`. A person may edit it; `pbm appraise` then judges the edited plan."


def read_plan(path: Path) -> Plan:
    """Read `plan.toml`.

    Raises
    ------
    PlanError
        If it is missing, is not UTF-8 or not TOML, or holds mistakes; the text lists all of them by key.
    """
    return read_written(path, Plan, PlanError)


def write_plan(path: Path, plan: Plan) -> None:
    """Write `plan.toml`; `read_plan` gives back an equal plan, every float to the last bit."""
    document = tomlkit.document()
    document.add(tomlkit.comment(_HEAD))
    document.add("made", _made(plan.made))
    streams = tomlkit.table(is_super_table=True)
    for name, stream in plan.streams.items():
        streams.add(name, _stream(stream))
    document.add("streams", streams)
    if plan.analysers:
        document.add("analysers", _filled(tomlkit.table(), {k: v.model_dump() for k, v in plan.analysers.items()}))
    replace_file(path, tomlkit.dumps(document).encode("utf-8"))


def plan_fingerprint(path: Path) -> str:
    """SHA-256 of the bytes of `plan.toml`, in hexadecimal.

    Raises
    ------
    PlanError
        If it cannot be read.
    """
    return hashlib.sha256(written_bytes(path, PlanError)).hexdigest()


def _made(made: Made) -> Table:
    return _filled(tomlkit.table(), made.model_dump(exclude_none=True))


def _stream(stream: StreamPlan) -> Table:
    table = _filled(tomlkit.table(), stream.model_dump(exclude_none=True, exclude={"monitors"}))
    if stream.monitors:
        table.add("monitors", _monitors(stream.monitors))
    return table


def _monitors(monitors: tuple[MonitorPlan, ...]) -> AoT:
    tables = tomlkit.aot()
    for monitor in monitors:
        tables.append(_filled(tomlkit.table(), monitor.model_dump(exclude_none=True)))
    return tables


def _filled(table: Table, content: dict[str, Any]) -> Table:
    for key, value in content.items():
        table.add(key, _item(value))
    return table


def _item(value: Any) -> Any:
    """A value as TOML holds it on one line."""
    if isinstance(value, dict):
        return _inline(value)
    if isinstance(value, tuple):
        return [_item(one) for one in value]
    if isinstance(value, float) and not isinstance(value, bool):
        return float(value)
    return value


def _inline(content: dict[str, Any]) -> InlineTable:
    table = tomlkit.inline_table()
    for key, value in content.items():
        table.add(key, _item(value))
    return table
