"""pbm: watches laboratory analysers between control events by the patient results themselves.

The names in `__all__` are for notebooks and scripts of people who plan controls; each is loaded when it is first used, so that a command
pays only for what it needs. Examples: docs/ideas/notebook.md.
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from pbm.io.history import read_history
    from pbm.io.lab_file import read_lab
    from pbm.io.plan_file import read_plan
    from pbm.methods.alarm import Limits, episodes
    from pbm.methods.chain import Preparation, Tracker, tracker_for
    from pbm.methods.controls import Rules, rejection_probability, run_length, survival
    from pbm.methods.expected import exposure, follow
    from pbm.methods.faults import Fault
    from pbm.methods.intervals import binomial_interval, poisson_interval
    from pbm.methods.limits import calibrated_limits, quick_limits
    from pbm.methods.onset import InControl, find_onset
    from pbm.methods.unreliable import ErrorModel, chance_unreliable
    from pbm.records.stream import StreamName

__version__ = "0.1.0"

__all__ = [
    "ErrorModel",
    "Fault",
    "InControl",
    "Limits",
    "Preparation",
    "Rules",
    "StreamName",
    "Tracker",
    "__version__",
    "binomial_interval",
    "calibrated_limits",
    "chance_unreliable",
    "episodes",
    "exposure",
    "find_onset",
    "follow",
    "poisson_interval",
    "quick_limits",
    "read_history",
    "read_lab",
    "read_plan",
    "rejection_probability",
    "run_length",
    "survival",
    "tracker_for",
]

_HOME = {
    "pbm.io.history": ("read_history",),
    "pbm.io.lab_file": ("read_lab",),
    "pbm.io.plan_file": ("read_plan",),
    "pbm.methods.alarm": ("Limits", "episodes"),
    "pbm.methods.chain": ("Preparation", "Tracker", "tracker_for"),
    "pbm.methods.controls": ("Rules", "rejection_probability", "run_length", "survival"),
    "pbm.methods.expected": ("exposure", "follow"),
    "pbm.methods.faults": ("Fault",),
    "pbm.methods.intervals": ("binomial_interval", "poisson_interval"),
    "pbm.methods.limits": ("calibrated_limits", "quick_limits"),
    "pbm.methods.onset": ("InControl", "find_onset"),
    "pbm.methods.unreliable": ("ErrorModel", "chance_unreliable"),
    "pbm.records.stream": ("StreamName",),
}


def __getattr__(name: str) -> Any:
    for module, names in _HOME.items():
        if name in names:
            return globals().setdefault(name, getattr(import_module(module), name))
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
