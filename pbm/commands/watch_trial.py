"""What `pbm watch --shadow` tells: that it is on trial, and at the end the alarms seen against those that the plan predicted."""

from typing import TYPE_CHECKING

from pbm.commands.tables import table
from pbm.io.store import Store
from pbm.records.plan import Plan
from pbm.records.snapshot import Batch

if TYPE_CHECKING:
    from pbm.stages.shadow import Trial

SHADOW = "shadow"  # the feed under whose name the store keeps what the trial has met so far
OPENING = (
    "On trial (--shadow): alarms are kept in the store and shown to nobody. The trial goes on over restarts; a watch without --shadow "
    "ends it."
)


class OnTrial:
    """A trial, as far as it has come."""

    def __init__(self, plan: Plan, store: Store) -> None:
        from pbm.stages.shadow import ShadowAccount  # its intervals take time to load, and only a trial needs them

        self._account = ShadowAccount(plan, store.position(SHADOW))

    def add(self, batch: Batch) -> dict[str, str]:
        """Count a batch; what is to be kept with it."""
        return {SHADOW: self._account.add(batch)} if batch.results else {}

    def __str__(self) -> str:
        from pbm.stages.shadow import together

        trials = self._account.streams()
        if not trials:
            return "On trial: no result of a watched stream has come yet."
        rows = [_row(one) for one in [*trials, together(trials)]]
        head = ["stream", "days", "predicted", "seen", "90 % interval of what was seen", "more than predicted"]
        return "\n".join(["Alarms of the trial so far:", "", table(head, rows)])


def _row(one: "Trial") -> list[str]:
    low, high = one.interval
    return [
        one.name,
        f"{one.days:.1f}",
        f"{one.predicted:.2f}",
        str(one.seen),
        f"{low:.2f} to {high:.2f}",
        "no" if one.agrees else "YES",
    ]


def end_trial(store: Store) -> dict[str, str]:
    """What is to be kept so that a later trial begins anew."""
    return {SHADOW: ""} if store.position(SHADOW) else {}
