"""What a person sets of a monitor on the command line of `pbm tune`, read and checked."""

from pbm.errors import InputError
from pbm.records.plan import Admit
from pbm.stages.by_hand import ByHand


def read_by_hand(
    admit: str | None,
    winsorize: bool,
    transform: str | None,
    statistic: str | None,
    parameters: dict[str, float | None],
    mix: bool | None,
) -> ByHand:
    """What is set.

    Parameters
    ----------
    admit, winsorize, transform, statistic, mix
        As given; None where not.
    parameters
        --weight, --window and --reference by name.

    Raises
    ------
    InputError
        If something is not understood, or does not fit together.
    """
    if transform not in (None, "none", "log", "boxcox"):
        raise InputError(f'--transform is none, log or boxcox, not "{transform}".')
    if winsorize and admit is None:
        raise InputError("--winsorize says what happens beyond --admit LOW:HIGH, which is not given.")
    named = {name: value for name, value in parameters.items() if value is not None}
    if len(named) > 1:
        raise InputError(f"A statistic has one of these: found {' and '.join(f'--{name}' for name in named)}.")
    return ByHand(_admit(admit, winsorize), transform, statistic, next(iter(named.values()), None), mix)


def _admit(text: str | None, winsorize: bool) -> Admit | None:
    from pydantic import ValidationError

    if text is None:
        return None
    try:
        low, high = (float(end) if end else None for end in text.split(":"))
        return Admit(low=low, high=high, mode="winsorize" if winsorize else "truncate")
    except (ValueError, ValidationError):
        raise InputError(f'--admit takes LOW:HIGH such as 125:155, with LOW below HIGH; found "{text}".') from None
