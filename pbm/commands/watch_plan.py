"""The plan in force while `pbm watch` runs: read at the start, and again when the signal HUP asks for it.

A new plan takes effect between two batches, at a moment that the audit records with the hashes of both plans. Monitors whose settings did
not change go on with their states; a plan that cannot be used leaves the old one in force.
"""

import signal
import threading
from dataclasses import dataclass

from pbm.commands.clock import now
from pbm.commands.folder import LabFolder
from pbm.commands.watch_text import opening
from pbm.errors import PlanError
from pbm.io.plan_file import plan_fingerprint, read_plan
from pbm.io.store import Store
from pbm.records.laboratory import Lab
from pbm.records.plan import Plan
from pbm.stages.live import Live
from pbm.stages.liveness import CLOCK
from pbm.stages.reorder import WAITING

MOST_EVENTS = 100_000


@dataclass(frozen=True)
class InForce:
    """A plan, its SHA-256, and the monitors that run by it."""

    plan: Plan
    fingerprint: str
    live: Live
    opening: str


class PlanFile:
    """Reads the plan and puts it in force.

    Parameters
    ----------
    folder, lab, shadow
        The laboratory, and whether the watch is on trial.
    """

    def __init__(self, folder: LabFolder, lab: Lab, *, shadow: bool) -> None:
        self._folder, self._lab, self._shadow = folder, lab, shadow
        self._asked = threading.Event()

    def read(self) -> tuple[Plan, str, Live]:
        """The plan as it stands in the file.

        Raises
        ------
        PlanError
            If there is none, or it cannot be used with this lab.toml.
        """
        path = self._folder.plan
        if not path.is_file():
            raise PlanError(f"There is no {path}, so nothing can be watched. `pbm tune` makes it from the history.")
        fingerprint, plan = plan_fingerprint(path), read_plan(path)
        if plan_fingerprint(path) != fingerprint:
            raise PlanError(f"{path} was changed while it was read. Start again when whoever writes it is done.")
        return plan, fingerprint, Live(self._lab, plan, fingerprint, shadow=self._shadow)

    def begin(self, store: Store) -> InForce:
        """Put the plan in force from the states that the store keeps."""
        plan, fingerprint, live = self.read()
        going_on = live.go_on(
            store.snapshots(),
            store.newest_times(),
            store.recent_results,
            store.events(MOST_EVENTS),
            store.position(CLOCK),
            store.open_notices(),
            store.position(WAITING),
        )
        changed = store.plan_in_force() not in ("", fingerprint)
        said = opening(live, going_on, changed=changed)
        what = "watch begun on trial" if self._shadow else "watch begun"
        store.begin(now(), what, fingerprint, said, [one.snapshot() for one in live.monitors])
        return InForce(plan, fingerprint, live, said if changed else "")

    def listen(self) -> None:
        """From now on the signal HUP asks for the plan to be read again."""
        signal.signal(signal.SIGHUP, lambda *_: self._asked.set())

    def reread(self, store: Store, before: InForce) -> InForce | None:
        """Put the plan in force anew if that was asked for: between two batches. None if it was not, or if the plan is the same.

        Raises
        ------
        PlanError
            If the plan cannot be used; the one of before stays in force.
        """
        if not self._asked.is_set():
            return None
        self._asked.clear()
        plan, fingerprint, live = self.read()
        if fingerprint == before.fingerprint:
            return None
        old = before.live
        going_on = live.go_on(
            [one.snapshot() for one in old.monitors],
            store.newest_times(),
            store.recent_results,
            store.events(MOST_EVENTS),
            old.liveness.state,
            store.open_notices(),
            old.reorder.state,
        )
        live.skew = old.skew
        said = opening(live, going_on, changed=True)
        store.begin(now(), "plan changed", fingerprint, said, [one.snapshot() for one in live.monitors])
        return InForce(plan, fingerprint, live, said)
