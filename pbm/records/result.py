"""One result as it arrives on the live feed."""

from dataclasses import dataclass

from pbm.records.stream import StreamName


@dataclass(frozen=True, slots=True)
class Result:
    """A patient result.

    Attributes
    ----------
    time
        UTC microseconds since 1970: when it was measured (or, failing that, reported).
    stream
        Analyte and analyser.
    value
        In the stream's unit; for a censored result the limit that was printed.
    censor
        -1 for "<v", +1 for ">v", 0.
    specimen, ward
        Text, "" where not given.
    patient
        A keyed one-way token, where repeats of a patient are limited; else "".
    sex, age
        "F" or "M", and one of `records.sex_and_age.AGE_BANDS`; "" where not given or not known.
    """

    time: int
    stream: StreamName
    value: float
    censor: int = 0
    specimen: str = ""
    ward: str = ""
    patient: str = ""
    sex: str = ""
    age: str = ""
