"""`fleet_budget` of lab.toml: the laboratory's false alarms shared among the streams that have a monitor."""

from functools import partial
from typing import TYPE_CHECKING

from pbm.commands.folder import LabFolder
from pbm.commands.work import Workers, over_streams, report_failures

if TYPE_CHECKING:
    from pbm.methods.fleet import Share
    from pbm.records.laboratory import Lab
    from pbm.records.plan import StreamPlan


def share_fleet_budget(
    folder: LabFolder, lab: "Lab", seed: int, workers: Workers, tuned: "dict[str, StreamPlan]"
) -> "dict[str, Share]":
    """Share the budget, and put the plans with their new limits in place of those in `tuned`; what each stream got.

    Nothing is shared where `lab.toml` gives no fleet budget.
    """
    from pbm.methods.fleet import shared
    from pbm.records.stream import StreamName
    from pbm.stages.tune import trade_off, tune_stream

    names = [StreamName.parse(name) for name, stream in tuned.items() if stream.monitors]
    if lab.alarms.fleet_budget is None or not names:
        return {}
    curves = over_streams(
        folder.history, names, partial(trade_off, lab=lab, seed=seed, plans=tuned), workers, "Sharing alarms"
    )
    report_failures(curves)
    found = shared([done.result for done in curves if done.result is not None], lab.alarms.fleet_budget.per_day)
    shares = {str(done.name): share for done, share in zip(curves, found, strict=True)}
    budgets = {name: share.budget for name, share in shares.items()}
    relimit = partial(tune_stream, lab=lab, seed=seed, kept=dict(tuned), budgets=budgets)
    limited = over_streams(folder.history, names, relimit, workers, "Setting limits")
    report_failures(limited)
    tuned |= {str(done.name): done.result.plan for done in limited if done.result is not None}
    return {name: share for name, share in shares.items() if tuned[name].monitors}


def told_shares(lab: "Lab", shares: "dict[str, Share]") -> str:
    """What each stream got of the fleet budget and what one more alarm a month would save there; empty where nothing was shared."""
    from pbm.commands.tables import table

    if not shares:
        return ""
    rows = [[name, f"{share.budget * 30:.2f}", f"{share.gain / 30:.2g}"] for name, share in shares.items()]
    head = ["stream", "alarms in 30 days", "unreliable results of an error that one more alarm in 30 days would save"]
    return f"\n\nFleet budget, {lab.alarms.fleet_budget}, shared where it saves most:\n\n{table(head, rows)}"
