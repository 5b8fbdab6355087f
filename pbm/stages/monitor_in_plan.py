"""A chosen monitor with its calibrated limits, confirmed on held-out days, as `plan.toml` holds it."""

from pbm.methods.held_out import held_out_alarms
from pbm.methods.in_control import inflation, slope, wander
from pbm.methods.limits import CalibratedLimits
from pbm.methods.trials import Stretch
from pbm.records.plan import HeldOut, MonitorPlan, Training
from pbm.stages.proving_ground import ProvingGround
from pbm.stages.second_monitor import Member
from pbm.stages.to_plan import chain_in_plan, limits_in_plan


def monitor_in_plan(ground: ProvingGround, whole: Stretch, member: Member, limits: CalibratedLimits) -> MonitorPlan:
    """The monitor; `whole` is the history with its held-out days, on which the limits are confirmed."""
    prepared, tracked = member.runner.candidate.preparation, member.runner.tracker
    z = ground.not_fitted_to(prepared)
    wandering = wander(z, round(ground.per_day))
    return MonitorPlan(
        watches=member.watches,
        **chain_in_plan(prepared, tracked, z),
        **limits_in_plan(limits),
        budget_per_day=member.budget,
        slope=slope(ground.training, prepared),
        inflation=inflation(z, wandering),
        wander=wandering,
        train=Training(days=ground.split.training_days, episodes=limits.episodes),
        held_out=_held_out(ground, whole, member, limits),
    )


def _held_out(ground: ProvingGround, whole: Stretch, member: Member, limits: CalibratedLimits) -> HeldOut:
    path = member.runner.tracker.path(whole.prepared(member.runner.candidate.preparation))
    found = held_out_alarms(path, limits.limits, ground.split, member.budget)
    predicted = limits.predicted(found.days / ground.split.training_days)
    return HeldOut(
        days=found.days, episodes=found.episodes, interval=found.interval, kept=found.kept, predicted=predicted
    )
