"""`pbm watch --health`: whether a watch is alive, and in which state its streams are, read from the store without disturbing it.

Healthy is a watch that has left a sign of life within `FRESH`. A quiet analyser, a wrong clock or an open alarm is told and is no ill
health of the watch: whoever restarts a watch that is not healthy would not bring an analyser back.
"""

import json
from collections import Counter
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

import typer

from pbm.commands.clock import now
from pbm.commands.folder import LabFolder
from pbm.errors import FeedError, InputError, PlanError
from pbm.io.lab_file import read_lab
from pbm.io.plan_file import read_plan
from pbm.io.store_place import store_place
from pbm.io.store_reader import StoreReader
from pbm.records.notice import Heartbeat, Notice
from pbm.records.snapshot import Snapshot
from pbm.records.stream import StreamName
from pbm.stages.liveness import QUIET, duration
from pbm.stages.states import State, state_of

FRESH = 30_000_000  # microseconds: three signs of life that were missed


@dataclass(frozen=True)
class Health:
    """What the store says of the watch.

    Attributes
    ----------
    healthy
        Whether a watch is alive.
    told
        For a person.
    heartbeat, notices, states
        The sign of life, the notices that are open, and the state of every monitor; nothing where the store cannot be read.
    off
        Streams of plan.toml that have no monitor.
    """

    healthy: bool
    told: str
    heartbeat: Heartbeat | None = None
    notices: Sequence[Notice] = ()
    states: Sequence[tuple[Snapshot, State]] = ()
    off: Sequence[str] = ()


def tell_health(folder: LabFolder, *, json: bool) -> None:
    """Print it, and leave with exit code 1 where no watch is alive."""
    health = health_of(folder, now())
    typer.echo(_as_json(health) if json else health.told)
    if not health.healthy:
        raise typer.Exit(1)


def health_of(folder: LabFolder, at: int) -> Health:
    """What the store of a laboratory says of its watch at an instant (UTC microseconds)."""
    try:
        reader = StoreReader(store_place(read_lab(folder.lab).store, folder.store))
        heartbeat, notices, snapshots = reader.heartbeat(), reader.open_notices(), reader.snapshots()
    except (InputError, FeedError) as error:
        return Health(False, f"Not healthy: {error}")
    states = [(one, _state(one, notices)) for one in snapshots]
    ill = _illness(heartbeat, at)
    off = _off(folder)
    told = (
        f"Not healthy: {ill}"
        if ill
        else _in_words(heartbeat, at, [*(state for _, state in states), *off.values()], notices)
    )
    return Health(not ill, told, heartbeat, notices, states, tuple(off))


def _off(folder: LabFolder) -> dict[str, State]:
    """Streams of the plan without a monitor; none where the plan cannot be read, which is no ill health of the watch."""
    with suppress(PlanError):
        return {name: "off" for name, stream in read_plan(folder.plan).streams.items() if not stream.monitors}
    return {}


def _state(one: Snapshot, notices: Sequence[Notice]) -> State:
    quiet = any(told.kind == QUIET and _is_about(told, one.stream) for told in notices)
    return state_of(one.admitted, one.needed, one.episode, quiet=quiet)


def _is_about(notice: Notice, stream: StreamName) -> bool:
    return notice.analyser == stream.analyser and notice.analyte in ("", stream.analyte)


def _illness(heartbeat: Heartbeat | None, at: int) -> str:
    """Why no watch is alive; "" if one is."""
    if heartbeat is None:
        return "no watch has left a sign of life here yet."
    if json.loads(heartbeat.state).get("ended"):
        return f"the watch (process {heartbeat.pid}) was ended {duration(max(0, at - heartbeat.at))} ago."
    if heartbeat.at > at + FRESH:
        return (
            f"the last sign of life lies {duration(heartbeat.at - at)} ahead: the computer's clock went back, and the watch (process "
            f"{heartbeat.pid}) has left none since."
        )
    if heartbeat.at < at - FRESH:
        return f"the watch (process {heartbeat.pid}) left its last sign of life {duration(at - heartbeat.at)} ago."
    return ""


def _in_words(heartbeat: Heartbeat | None, at: int, states: Sequence[State], notices: Sequence[Notice]) -> str:
    assert heartbeat is not None
    counts = Counter(states)
    arrived = (
        "no result since it began"
        if heartbeat.last_arrival is None
        else f"last result {duration(max(0, at - heartbeat.last_arrival))} ago"
    )
    trial = " on trial" if json.loads(heartbeat.state).get("shadow") else ""
    monitors = ", ".join(f"{count} {state}" for state, count in counts.most_common()) or "none"
    said = "".join(f"; {one.text}" for one in notices)
    return f"Healthy: alive{trial} {duration(max(0, at - heartbeat.at))} ago, {arrived}; monitors: {monitors}{said}"


def _as_json(health: Health) -> str:
    beat = health.heartbeat
    given: dict[str, Any] = {"healthy": health.healthy, "told": health.told}
    if beat:
        given |= {"pid": beat.pid, "started": _utc(beat.started), "at": _utc(beat.at)}
        given |= {"last_result": _utc(beat.last_result), "last_arrival": _utc(beat.last_arrival)}
        given |= json.loads(beat.state)
    given["notices"] = [
        {"since": _utc(n.time), "kind": n.kind, "analyte": n.analyte, "analyser": n.analyser, "text": n.text}
        for n in health.notices
    ]
    given["monitors"] = [
        {"stream": str(s.stream), "monitor": s.monitor, "state": state, "admitted": s.admitted, "needed": s.needed}
        for s, state in health.states
    ]
    given["monitors"] += [{"stream": name, "monitor": None, "state": "off"} for name in health.off]
    return json.dumps(given, ensure_ascii=False)


def _utc(time: int | None) -> str | None:
    return None if time is None else datetime.fromtimestamp(time / 1e6, UTC).isoformat().replace("+00:00", "Z")
