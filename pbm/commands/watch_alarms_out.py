"""Alarms of `pbm watch` out of the store: which are to go where by `[alarms]` of lab.toml, and how far that has come."""

from pathlib import Path

from pbm.io.outbox import ALARMS_OUT, Exits, Outbox
from pbm.io.store import Store
from pbm.records.laboratory import Alarms


class AlarmsOut:
    """Alarms on their way to the file and the command of the laboratory; nowhere if it has neither.

    Parameters
    ----------
    rules, folder
        `[alarms]` of lab.toml, and the laboratory's folder.
    store
        Where the alarms are, and how many are out. Alarms of before the first watch with an exit do not go out.
    """

    def __init__(self, rules: Alarms, folder: Path, store: Store) -> None:
        self._store, self._box = store, None
        if rules.file or rules.command:
            exits = Exits(folder, folder / rules.file if rules.file else None, rules.command, rules.command_seconds)
            self._kept = store.position(ALARMS_OUT)
            self._box = Outbox(exits, int(self._kept) if self._kept else store.last_alarm)
            self.send_new()

    def send_new(self) -> None:
        """Send what the store has and is not sent yet."""
        if self._box:
            self._box.send(self._store.alarms_after(self._box.sent))

    def position(self) -> dict[str, str]:
        """How far alarms are out, for the next batch, where that is not kept yet."""
        if self._box is None or self._kept == (out := str(self._box.out)):
            return {}
        self._kept = out
        return {ALARMS_OUT: out}

    def failures(self) -> list[str]:
        """What went wrong since this was last asked."""
        return self._box.failures() if self._box else []

    def close(self) -> None:
        """Wait for what is on its way."""
        if self._box:
            self._box.close()
