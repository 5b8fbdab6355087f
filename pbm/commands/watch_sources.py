"""The sources that `pbm watch` is given with --from: each is opened where it was left, with the reader of its kind."""

import sys
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from pbm.commands.folder import LabFolder
from pbm.errors import InputError
from pbm.io.feeds import Feed, FileFeed, LineFeed, PacedFeed
from pbm.io.follow import FollowedFile
from pbm.io.patient_key import patient_key
from pbm.io.store import Store
from pbm.records.laboratory import Lab
from pbm.stages.reading import Reader

if TYPE_CHECKING:
    from ssl import SSLContext

STDIN, HISTORY = "standard input", "history"
Tell = Callable[[str], None]


@dataclass(frozen=True)
class Source:
    """A feed, its name, how its readings are read, and the file behind it."""

    name: str
    feed: Feed
    reader: Reader
    file: FollowedFile | None = None

    def notices(self) -> list[str]:
        """What the file has to say since it was last asked."""
        said = self.file.notices[:] if self.file else []
        if self.file:
            del self.file.notices[: len(said)]
        return said


def check_sources(given: Sequence[str], *, speed: float | None) -> None:
    """See that sources go together.

    Raises
    ------
    InputError
        If they do not.
    """
    if not given:
        raise InputError(
            "--from says what to watch: mllp://HOST:PORT, a CSV file, - for NDJSON on standard input, or history."
        )
    if speed is not None and HISTORY not in given:
        raise InputError(
            "--speed paces the replay of a history: pbm watch --from history --speed 60. Other feeds have their own pace."
        )
    if twice := next((one for one in given if given.count(one) > 1), ""):
        raise InputError(f"--from {twice} is given twice. Name each source once.")


class Opener:
    """Opens sources.

    Parameters
    ----------
    folder, lab, store
        The laboratory; the store knows where each source was left.
    tell
        Says something to a person.
    """

    def __init__(self, folder: LabFolder, lab: Lab, store: Store, tell: Tell) -> None:
        self._folder, self._lab, self._store, self._tell = folder, lab, store, tell
        self._key = patient_key(folder.patient_key) if any(one.repeat_hours for one in lab.analytes.values()) else b""

    def open(self, source: str, *, once: bool, speed: float | None) -> Source:
        """A source.

        Raises
        ------
        InputError
            If there is no such source, or it cannot be used.
        """
        if source == HISTORY:
            return self._history(speed)
        if source == "-":
            feed = LineFeed(STDIN, sys.stdin.fileno(), self._store.position(STDIN))
            return Source(STDIN, feed, Reader(self._lab, patient_key=self._key))
        if source.startswith(("mllp://", "mllps://")):
            return self._messages(source)
        if "://" in source:
            raise InputError(
                f'"{source}" is no feed that this version reads. Give mllp://HOST:PORT or mllps://HOST:PORT for HL7 messages, a CSV file, '
                "- for NDJSON on standard input, or history."
            )
        return self._file(Path(source), once=once)

    def _file(self, path: Path, *, once: bool) -> Source:
        columns = self._lab.extract
        file = FollowedFile(path, columns, self._store.position(str(path.absolute())))
        reader = Reader(
            self._lab,
            columns.decimal,
            columns.time_format,
            units_given=columns.unit is not None,
            kinds_given=columns.kind is not None,
            patient_key=self._key,
        )
        return Source(file.source, FileFeed(file, once=once), reader, file)

    def _history(self, speed: float | None) -> Source:
        from pbm.io.replay import Replay  # Parquet takes time to load, and only a replay needs it

        history = self._folder.history
        replay = Replay(history, self._store.position(Replay.name(history)))
        feed = PacedFeed(replay.chunks(1) if speed else replay.chunks(), speed)
        return Source(replay.source, feed, Reader(self._lab))

    def _messages(self, source: str) -> Source:
        from pbm.io.feeds_mllp import MllpFeed, listen  # only those who receive messages wait for this to load
        from pbm.io.hl7_message import MessageReader
        from pbm.io.hl7_results import PATIENT

        socket, tls = listen(source, self._lab.feed), self._tls(source)
        feed = MllpFeed(
            source, socket, self._lab.feed, MessageReader(self._lab), self._store.position(source), self._tell, tls
        )
        self._tell(f"Listening at {feed.address} for HL7 messages.")
        return Source(source, feed, Reader(self._lab, patient_kinds=(PATIENT,), patient_key=self._key))

    def _tls(self, source: str) -> "SSLContext | None":
        if not source.startswith("mllps://"):
            return None
        from pbm.io.tls import server_context

        return server_context(self._lab.feed, self._folder.root)
