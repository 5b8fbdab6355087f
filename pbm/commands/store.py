"""`pbm store check` and `pbm store export FOLDER`: whether what `pbm watch` keeps is whole, and all of it as files for other programs."""

import re
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption
from pbm.errors import InputError, PbmError

if TYPE_CHECKING:
    from pbm.io.store_check import Checked
    from pbm.io.store_place import Place

_HASH = re.compile(r"[0-9a-f]{8,64}")

app = typer.Typer(
    help="Look after the store that pbm watch writes.",
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)

HeadOption = Annotated[
    str,
    typer.Option(
        "--head",
        metavar="HASH",
        help="A hash of the audit that was noted earlier, or its first digits; it must still be in it.",
        show_default=False,
    ),
]
FolderArgument = Annotated[
    Path, typer.Argument(metavar="FOLDER", help="Where the files go; it is made if it is not there.")
]
LinesOption = Annotated[bool, typer.Option("--json", help="Write NDJSON, one JSON object a line, in place of CSV.")]


@app.command("check")
def check(lab: LabOption = None, head: HeadOption = "", json: JsonOption = False) -> None:
    """Check that the store is whole: the database, the account of what the feeds delivered, alarms, states, and the chain of the audit.

    The watch may run meanwhile. Exit code 1 if anything is wrong.

    Example:  pbm store check
    """
    if head and not _HASH.fullmatch(head):
        raise InputError(f'--head takes a hash of the audit, at least its first 8 digits; found "{head}".')
    place, folder = _existing(lab)
    found = []
    for one in _checks(place, folder, head):
        found.append(one)
        if not json:
            typer.echo(_told(one))
    wrong = sum(len(one.wrong) for one in found)
    if json:
        typer.echo(_as_json(place, found))
    else:
        typer.echo(
            f"\nThe store is not whole: {wrong} mistake{'s' * (wrong > 1)}." if wrong else "\nThe store is whole."
        )
    raise typer.Exit(1 if wrong else 0)


@app.command("export")
def export(to: FolderArgument, lab: LabOption = None, json: LinesOption = False) -> None:
    """Write results, alarms, events, notices, annotations and audit to files for other programs. The watch may run meanwhile.

    Example:  pbm store export from-the-store
    """
    from pbm.io.store_export import export_store

    place, _ = _existing(lab)
    try:
        to.mkdir(exist_ok=True)
        for path, count in export_store(place, to, as_json=json):
            typer.echo(f"{path}: {count:,} row{'s' * (count != 1)}")
    except OSError as error:
        raise InputError(
            f"{to} cannot be written: {error.strerror}. Name a folder where there is room and this user may write."
        ) from None


def _existing(lab: Path | None) -> "tuple[Place, LabFolder]":
    """The place of the laboratory's store, in which there is one that this version reads."""
    from pbm.commands.lab import read_checked_lab
    from pbm.io.store_place import store_place
    from pbm.io.store_reader import StoreReader

    folder = LabFolder.find(lab)
    place = store_place(read_checked_lab(folder.lab).store, folder.store)
    StoreReader(place)
    return place, folder


def _checks(place: "Place", folder: LabFolder, head: str) -> "Iterator[Checked]":
    from pbm.io.store_check import check_store

    yield from check_store(place, head)
    yield _states(place, folder)


def _states(place: "Place", folder: LabFolder) -> "Checked":
    """Whether the watch would go on from every state of the present plan."""
    from pbm.io.lab_file import read_lab
    from pbm.io.plan_file import read_plan
    from pbm.io.store_check import Checked
    from pbm.io.store_reader import StoreReader
    from pbm.stages.live import Live

    try:
        live = Live(read_lab(folder.lab), read_plan(folder.plan), "")
        kept = StoreReader(place).snapshots()
    except PbmError as error:
        return Checked("states", f"not read: {error}")
    monitors = {(one.stream, one.settings): one for one in live.monitors}
    wrong, read = [], 0
    for snapshot in kept:
        if monitor := monitors.get((snapshot.stream, snapshot.settings)):
            read += 1
            try:
                monitor.go_on(snapshot.state, [])
            except PbmError as error:
                wrong.append(str(error))
    others = f"; {len(kept) - read} of another plan not read" if read < len(kept) else ""
    return Checked("states", f"the watch would go on from {read - len(wrong)} of {read} monitors{others}", tuple(wrong))


def _told(one: "Checked") -> str:
    lines = [f"{one.what:<12}{'WRONG' if one.wrong else 'ok':<7}{one.told}"]
    return "\n".join([*lines, *(f"{'':<19}{text}" for text in one.wrong)])


def _as_json(place: "Place", found: "list[Checked]") -> str:
    import json

    from pbm.io.store_place import in_words

    checks = [{"what": one.what, "ok": not one.wrong, "told": one.told, "wrong": list(one.wrong)} for one in found]
    whole = all(one["ok"] for one in checks)
    return json.dumps({"store": in_words(place), "whole": whole, "checks": checks}, indent=2, ensure_ascii=False)
