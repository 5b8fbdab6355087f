"""`pbm watch --from SOURCE`: the live feed through the monitors into the store, and alarm lines as they come."""

from typing import Annotated

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption

FromOption = Annotated[
    list[str],
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


def watch(
    from_: FromOption,
    lab: LabOption = None,
    json: JsonOption = False,
    once: OnceOption = False,
    speed: SpeedOption = None,
    keep: KeepOption = None,
) -> None:
    """Watch the live feed with the monitors of plan.toml, and print a line for each alarm.

    Results, states and alarms are kept in watch.sqlite. Stopped anywhere (Ctrl-C, a power cut) and started again, it goes on as if it had
    never stopped. Alarms go to standard output, everything else to standard error.

    Example:  pbm watch --from live.csv
    """
    from pbm.commands.watch_work import watch_feed

    watch_feed(LabFolder.find(lab), from_, json=json, once=once, speed=speed, keep=keep)
