"""What is too old leaves the store while the watch goes on: a step after each batch, a whole removal once a day."""

import re
import time
from contextlib import suppress

from pbm.errors import InputError, StoreWaits
from pbm.io.store import Store
from pbm.io.store_retention import Sweep
from pbm.records.laboratory import Lab
from pbm.records.stream import RERUN_HOURS

_HOUR = 3_600_000_000
_DAY = 24 * _HOUR
_DAYS = re.compile(r"(\d{1,5}) ?d(?:ays?)?")


class Removal:
    """Removes results older than so many days, if any are given.

    Parameters
    ----------
    keep
        Such as "90d"; None to keep everything.
    lab
        The laboratory, whose rules on repeats and reruns need what is kept.

    Raises
    ------
    InputError
        If it is no number of days, or too few for those rules.
    """

    def __init__(self, keep: str | None, lab: Lab) -> None:
        self._keep = None if keep is None else _days(keep) * _DAY
        needed = max(2 * RERUN_HOURS, *(one.repeat_hours for one in lab.analytes.values())) * _HOUR
        if self._keep is not None and self._keep < needed:
            raise InputError(
                f"--keep {keep} is too short: reruns of specimens and repeats of patients are told from what was kept. Keep at least "
                f"{-(-needed // _DAY):.0f}d."
            )
        self._sweep: Sweep | None = None
        self._next = 0

    def step(self, store: Store) -> None:
        """Remove a little, if something is due."""
        now = time.time_ns() // 1_000
        if self._keep is None or (self._sweep is None and now < self._next):
            return
        if self._sweep is None:
            self._sweep, self._next = Sweep(now - self._keep), now + _DAY
        # What a full disk does not let go is left for the next step.
        with suppress(StoreWaits):
            self._sweep = store.remove_old(self._sweep, now)


def _days(text: str) -> int:
    found = _DAYS.fullmatch(text.strip())
    if found is None:
        raise InputError(f'--keep takes a number of days such as 90d; found "{text}".')
    return int(found[1])
