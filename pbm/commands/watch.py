"""`pbm watch --from SOURCE`: the live feed through the monitors into the store, and alarm lines as they come."""

from pathlib import Path
from typing import Annotated

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption

FromOption = Annotated[
    list[str] | None,
    typer.Option(
        "--from",
        metavar="SOURCE",
        help="mllp://HOST:PORT for HL7 messages (mllps:// with certificates), a CSV file that grows, - for NDJSON on standard input, or "
        "history to replay history/. May be given several times.",
        show_default=False,
    ),
]
OnceOption = Annotated[
    bool, typer.Option("--once", help="Read the file to its end and stop, instead of following it as it grows.")
]
SpeedOption = Annotated[
    float | None,
    typer.Option(
        "--speed", min=0.001, help="Replay so many times faster than it happened.", show_default="as fast as it goes"
    ),
]
KeepOption = Annotated[
    str | None,
    typer.Option(
        "--keep",
        metavar="DAYS",
        help="Remove results older than so many days, such as 90d, from the store; those that the watch or an alarm needs stay.",
        show_default="everything",
    ),
]
EventsOption = Annotated[
    Path | None,
    typer.Option(
        "--events",
        metavar="FILE",
        help="A CSV file of laboratory events that grows, with the columns time, event, analyte, analyser, detail.",
        show_default=False,
    ),
]
ShadowOption = Annotated[
    bool, typer.Option("--shadow", help="On trial: alarms are kept but not shown; the end tells them against the plan.")
]
HealthOption = Annotated[bool, typer.Option("--health", help="Tell whether a watch is alive, and watch nothing.")]


def watch(
    from_: FromOption = None,
    lab: LabOption = None,
    json: JsonOption = False,
    once: OnceOption = False,
    speed: SpeedOption = None,
    keep: KeepOption = None,
    events: EventsOption = None,
    shadow: ShadowOption = False,
    health: HealthOption = False,
) -> None:
    """Watch the live feed with the monitors of plan.toml, and print a line for each alarm.

    Results, states and alarms are kept in watch.sqlite. Stopped anywhere (Ctrl-C, a power cut) and started again, it goes on as if it had
    never stopped. Alarms go to standard output, everything else to standard error. The signal HUP has plan.toml read again.

    With --health nothing is watched: it tells whether a watch is alive; the exit code is 0 if one is, and 1 if none is.

    Example:  pbm watch --from live.csv
    """
    folder = LabFolder.find(lab)
    if health:
        from pbm.commands.watch_health import tell_health

        tell_health(folder, json=json)
        return
    from pbm.commands.watch_work import Options, watch_feed

    watch_feed(folder, Options(from_ or [], json, once, shadow, speed, keep, events))
