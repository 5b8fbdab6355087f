"""The laboratory as its people describe it in `lab.toml`: extract columns, analytes, TEa, controls, alarm budget."""

from collections.abc import Iterable, Iterator, Mapping
from typing import Annotated, Literal, get_args
from urllib.parse import parse_qs, urlsplit
from zoneinfo import ZoneInfo, available_timezones

from pydantic import AfterValidator, Field, model_validator

from pbm.records.feed import FeedSettings, known_encoding
from pbm.records.quantities import (
    AlarmRate,
    AllowableError,
    AnalyticSd,
    ClockTime,
    EveryResults,
    Finite,
    Lag,
    NotNegative,
    Positive,
    Rate,
    ResponseLag,
    Signs,
    Written,
)
from pbm.records.units import spellings
from pbm.records.watching import EventRules, Quiet


def _known_zone(name: str) -> str:
    if name not in available_timezones():
        raise ValueError('expected a time zone of the IANA database such as "Atlantic/Azores"')
    return name


def _known_store(address: str) -> str:
    parts = urlsplit(address)
    if parts.scheme != "postgresql" or not parts.path.strip("/") or "password" in parse_qs(parts.query):
        raise ValueError(
            'expected the address of a PostgreSQL database such as "postgresql://watch@localhost:5432/laboratory"'
        )
    if parts.port == 0:  # asking for it finds out that it is no number
        raise ValueError("expected a port of at least 1")
    return address


class Identity(Written):
    """Who the laboratory is and in which time zone its clocks stand.

    Attributes
    ----------
    name
        As it stands on reports.
    timezone
        Of the laboratory's clocks: times without an offset, control times and days are read in it.
    """

    name: str = Field(min_length=1)
    timezone: Annotated[str, AfterValidator(_known_zone)]

    @property
    def zone(self) -> ZoneInfo:
        """The time zone of the laboratory's clocks."""
        return ZoneInfo(self.timezone)


class Extract(Written):
    """Which column of the extract holds what; columns not named here are ignored.

    Attributes
    ----------
    time
        When the result was measured; failing that, reported.
    analyte
        The test, in any spelling that `analytes.NAME.names` lists.
    value
        The result as it is written, with "<" and ">" where it has them.
    analyser
        The line or instrument. Without it all analysers of an analyte are one stream, called "pooled".
    unit
        The unit; rows in another one are left out, never converted.
    specimen
        Tells reruns and duplicates of a specimen from results of different specimens.
    ward
        Where the patient is; for patient mix and for `leave_out_wards`.
    sex
        For patient mix; "F", "female", "W", "M" and the like are read, and a letter is kept.
    age
        For patient mix; an age such as "67", "67 y" or "3 m" is read, never a birth date, and a band of ages is kept.
    priority
        Kept beside the result.
    lot
        Lot of the reagent; `pbm survey` then tells how the level moved from lot to lot.
    patient
        Kept as a keyed one-way token only; for `repeat_hours`.
    kind
        Tells patients' results from controls and proficiency; see `patient_kinds`.
    time_format
        How times are written, as a strptime pattern; ISO 8601 without it.
    decimal
        The decimal sign of numbers.
    delimiter
        What parts the columns; found out and told without it.
    encoding
        Of the text; found out and told without it.
    patient_kinds
        What `kind` holds for a patient's result; every other row is left out.
    """

    time: str
    analyte: str
    value: str
    analyser: str | None = None
    unit: str | None = None
    specimen: str | None = None
    ward: str | None = None
    sex: str | None = None
    age: str | None = None
    priority: str | None = None
    lot: str | None = None
    patient: str | None = None
    kind: str | None = None
    time_format: str | None = None
    decimal: Literal[".", ","] = "."
    delimiter: str | None = Field(default=None, min_length=1, max_length=1)
    encoding: Annotated[str, AfterValidator(known_encoding)] | None = None
    patient_kinds: tuple[str, ...] = ("P",)


class Alarms(Written):
    """How many false alarms the bench can bear, how long it takes to stop reporting after one, and where alarms go.

    Attributes
    ----------
    budget
        False alarms of one stream.
    fleet_budget
        False alarms of the whole laboratory together, shared among the streams where they save most.
    response_lag
        What is still reported between an alarm and the stop.
    file
        Each alarm is added to this file as a line of JSON; without a leading "/" it is in the laboratory's folder.
    command
        Run for each alarm: the program and its arguments, as they are and without a shell; the alarm comes as JSON on its standard input.
    command_seconds
        After so many seconds the command is ended.
    """

    budget: AlarmRate = Rate(1, 30)
    fleet_budget: AlarmRate | None = None
    response_lag: ResponseLag = Lag(results=10)
    file: Annotated[str, Field(min_length=1)] | None = None
    command: Annotated[tuple[str, ...], Field(min_length=1)] | None = None
    command_seconds: Annotated[float, Field(gt=0, le=600)] = 10.0


class ControlLevel(Written):
    """A control material: its mean and SD on the analyser, and how often it is measured at an event.

    Attributes
    ----------
    mean, sd
        In control, in the unit of the analyte.
    repeats
        Measurements at each event.
    """

    mean: Finite
    sd: Positive
    repeats: int = Field(default=1, ge=1, le=10)


Weekday = Literal["Mon", "Tue", "Wed", "Thu", "Fri", "Sat", "Sun"]
WEEKDAYS: tuple[Weekday, ...] = get_args(Weekday)


class Controls(Written):
    """A control schedule: clock times or a count of results, the rules, and the levels measured.

    Attributes
    ----------
    times
        Control events at these local clock times.
    weekdays
        With times: the days on which there are control events; every day if left out.
    every
        Instead of times: a control event after so many results of the stream.
    rules
        Control rules by their trade notation: k-Ls, kofm-Ls, kx, R-4s, R-4s-opposite.
    levels
        Control materials measured at each event.
    """

    times: tuple[ClockTime, ...] | None = None
    weekdays: Annotated[tuple[Weekday, ...], Field(min_length=1)] | None = None
    every: EveryResults | None = None
    rules: tuple[str, ...] | None = None
    levels: tuple[ControlLevel, ...] = ()

    @model_validator(mode="after")
    def _times_or_count(self) -> "Controls":
        if self.times is not None and self.every is not None:
            raise ValueError("expected times or every, not both")
        if self.weekdays is not None and self.times is None:
            raise ValueError("weekdays goes with times")
        return self

    def on_weekdays(self) -> frozenset[int]:
        """The days with control events by clock time, 0 = Monday."""
        return frozenset(WEEKDAYS.index(day) for day in self.weekdays or WEEKDAYS)

    def over(self, default: "Controls") -> "Controls":
        """These controls with what is not said here taken from the laboratory's default."""
        scheduled = self if self.times is not None or self.every is not None else default
        return Controls(
            times=scheduled.times,
            weekdays=scheduled.weekdays,
            every=scheduled.every,
            rules=self.rules if self.rules is not None else default.rules,
            levels=self.levels or default.levels,
        )


class FaultList(Written):
    """Errors to simulate: one kind in several sizes.

    Attributes
    ----------
    kind
        A shift, a drift that grows to its size, noise that multiplies the analytic SD, or a sporadic shift.
    sizes
        In `unit`; for noise the factor on the analytic SD.
    unit
        TEa or analytic SD of each result, the unit of the analyte, or percent of the result.
    signs
        To which side.
    over
        Of a drift: results until it has grown to its size; the first affected one if left out.
    share
        Of a sporadic shift: the share of results that it hits; all of them if left out.
    weight
        Of these faults in the score by which monitors are chosen.
    """

    kind: Literal["shift", "drift", "noise", "sporadic"] = "shift"
    sizes: tuple[Positive, ...] = Field(min_length=1)
    unit: Literal["TEa", "SD", "unit", "percent"] = "TEa"
    signs: Signs = "both"
    over: EveryResults | None = None
    share: Annotated[float, Field(gt=0, le=1)] | None = None
    weight: Positive = 1.0

    @model_validator(mode="after")
    def _noise_adds(self) -> "FaultList":
        if self.kind == "noise" and min(self.sizes) <= 1:
            raise ValueError("expected sizes above 1 for noise: they are factors on the analytic SD")
        return self


DEFAULT_FAULTS = (FaultList(sizes=(0.25, 0.5, 0.75, 1.0, 1.5, 2.0)),)


class FaultRate(Written):
    """How often errors come: an assumption, which only scales what `pbm appraise` says of a year.

    Attributes
    ----------
    per_year
        Error conditions of one stream in a year.
    """

    per_year: NotNegative = 5.0


class Range(Written):
    """A closed range of results; an open side is left out.

    Attributes
    ----------
    low, high
        Both inside.
    """

    low: Finite | None = None
    high: Finite | None = None

    @model_validator(mode="after")
    def _in_order(self) -> "Range":
        if self.low is not None and self.high is not None and self.low >= self.high:
            raise ValueError("expected low below high")
        return self


class Analyte(Written):
    """One measurand: unit, resolution, TEa, analytic SD, spellings, controls and the errors to guard against.

    Attributes
    ----------
    unit
        In which everything about the analyte is given.
    step
        In which results are reported.
    allowable_error
        TEa: a result is unreliable if its error exceeds it.
    analytic_sd
        SD of the method on one specimen.
    loinc
        LOINC code.
    names
        Other spellings in extract and feed; the name of the table itself always counts.
    unit_names
        Other spellings of the same unit. Litre as L or l, micro as u or its sign, 10* as 10^, and [IU] as IU are known without being given.
    reportable
        The method's limits: below and above them it prints "<" and ">".
    plausible
        A result outside is left out as impossible.
    leave_out_wards
        Wards whose results are left out.
    repeat_hours
        A patient's results count at most once in so many hours; 0: all of them.
    budget
        False alarms of one stream of this analyte, instead of `alarms.budget`.
    controls
        What differs from the laboratory's `[controls]`.
    faults
        Errors to guard against.
    """

    unit: str = Field(min_length=1)
    step: Positive
    allowable_error: AllowableError
    analytic_sd: AnalyticSd
    loinc: str | None = None
    names: tuple[str, ...] = ()
    unit_names: tuple[str, ...] = ()
    reportable: Range = Range()
    plausible: Range = Range()
    leave_out_wards: tuple[str, ...] = ()
    repeat_hours: NotNegative = 0.0
    budget: AlarmRate | None = None
    controls: Controls = Controls()
    faults: tuple[FaultList, ...] = Field(default=DEFAULT_FAULTS, min_length=1)

    def known_units(self) -> tuple[str, ...]:
        """The unit and its other spellings, the unit first, each with those that mean the same in UCUM."""
        written = (self.unit, *self.unit_names)
        return tuple(dict.fromkeys([*written, *(text for unit in written for text in spellings(unit))]))


def spelling_clashes(spellings: Mapping[str, Iterable[str]]) -> Iterator[str]:
    """What makes an analyte's name or spelling ambiguous; `spellings` are the other spellings of each analyte."""
    owner: dict[str, str] = {}
    for key, names in spellings.items():
        if "@" in key or "/" in key:
            yield f'analytes."{key}": a name may not hold "@" or "/"'
        for name in dict.fromkeys((key, *names)):
            if (other := owner.setdefault(name, key)) != key:
                yield f'analytes.{key}.names: the spelling "{name}" is given for both {other} and {key}'


class Lab(Written):
    """All of `lab.toml`.

    Attributes
    ----------
    laboratory
        The laboratory.
    extract
        The columns of its extracts.
    alarms
        The alarm budget, and where alarms go.
    controls
        The control schedule of every analyte that does not say otherwise.
    faults
        How often errors come.
    quiet
        When silence is told.
    events
        What laboratory events do.
    feed
        How HL7 messages are received and read.
    analytes
        The analytes, by a short name of the laboratory's choice.
    store
        The PostgreSQL database that `pbm watch` writes, instead of `watch.sqlite` beside this file; written above the first table.
    """

    laboratory: Identity
    extract: Extract
    alarms: Alarms = Alarms()
    controls: Controls = Controls()
    faults: FaultRate = FaultRate()
    quiet: Quiet = Quiet()
    events: EventRules = EventRules()
    feed: FeedSettings = FeedSettings()
    analytes: dict[str, Analyte] = Field(min_length=1)
    store: Annotated[str, AfterValidator(_known_store)] | None = Field(default=None, repr=False)

    @model_validator(mode="after")
    def _names_are_unambiguous(self) -> "Lab":
        if clashes := list(spelling_clashes({key: analyte.names for key, analyte in self.analytes.items()})):
            raise ValueError("\n".join(clashes))
        return self

    def spellings(self) -> dict[str, str]:
        """Every spelling met in an extract or feed -> the analyte's key."""
        return {name: key for key, analyte in self.analytes.items() for name in (key, *analyte.names)}

    def controls_of(self, analyte: str) -> Controls:
        """The control schedule of an analyte: its own, filled up from the laboratory's default."""
        return self.analytes[analyte].controls.over(self.controls)

    def budget_of(self, analyte: str) -> Rate:
        """The alarm budget of one stream of an analyte."""
        return self.analytes[analyte].budget or self.alarms.budget
