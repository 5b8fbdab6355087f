"""Which observations of an HL7 message belong together: those of one order, with their patient, visit, specimen and container.

    ORU^R01   { PID [PV1] { [ORC] OBR { OBX [PRT] } [SPM { OBX }] } }      the specimen stands behind its observations
    OUL^R22   [PID [PV1]] { SPM { OBX } [SAC] { OBR { OBX [PRT] } } }      the specimen stands before them

Observations next to SPM are of the specimen itself (its volume, its look) and no results. Senders of ORU put SPM before the observations
too, or once for several orders of a patient; both can be told and are read. Source: HL7 version 2.8.2, chapters 7 and 22.
"""

from collections.abc import Iterable
from dataclasses import dataclass, field

from pbm.io.hl7_segments import Fields

LONGEST = 48  # fields of a segment that are asked for
NONE: Fields = [""] * LONGEST


@dataclass(slots=True)
class Observation:
    """OBX; whether it is one of the specimen itself; and the device that PRT or DEV name."""

    fields: Fields
    of_specimen: bool = False
    device: str = ""


@dataclass(slots=True)
class Order:
    """Observations under one OBR, and what they were made of."""

    patient: Fields
    visit: Fields
    fields: Fields = field(default_factory=lambda: NONE)
    specimen: Fields | None = None
    container: Fields = field(default_factory=lambda: NONE)
    observations: list[Observation] = field(default_factory=list)


def orders(segments: Iterable[Fields], *, specimen_first: bool) -> list[Order]:
    """The orders of a message.

    Parameters
    ----------
    segments
        After the header, in order.
    specimen_first
        Whether the message is one in which a specimen stands before its orders (OUL).
    """
    walk = _Walk(specimen_first)
    for fields in segments:
        walk.take(fields)
    walk.end_patient()
    return [order for order in walk.found if order.observations]


class _Walk:
    """Goes over the segments; knows what is in force at each."""

    def __init__(self, specimen_first: bool) -> None:
        self.found: list[Order] = []
        self._specimen_first = specimen_first
        self._of_patient: list[Order] = []
        self._patient = self._visit = self._container = NONE
        self._specimens: list[Fields] = []  # of the patient
        self._before: Fields | None = None  # that stands before its orders
        self._order: Order | None = None
        self._about_specimen = False

    def take(self, fields: Fields) -> None:
        if (meet := _MEETING.get(fields[0])) is not None:
            meet(self, fields + NONE[len(fields) :])

    def end_patient(self) -> None:
        """Orders that tell no specimen are of the only one that their patient has."""
        if len(self._specimens) == 1:
            for order in self._of_patient:
                order.specimen = order.specimen or self._specimens[0]
        self.found += self._of_patient
        self._of_patient, self._specimens, self._order, self._before = [], [], None, None
        self._container, self._about_specimen = NONE, False

    def meet_patient(self, fields: Fields) -> None:
        self.end_patient()
        self._patient, self._visit = fields, NONE

    def meet_visit(self, fields: Fields) -> None:
        self._visit = fields

    def meet_order(self, fields: Fields) -> None:
        self._order = self._begin(fields)
        self._about_specimen = False

    def _begin(self, fields: Fields) -> Order:
        order = Order(self._patient, self._visit, fields, self._before, self._container)
        self._of_patient.append(order)
        return order

    def meet_specimen(self, fields: Fields) -> None:
        self._specimens.append(fields)
        behind = not self._specimen_first and self._order is not None and bool(self._order.observations)
        if behind and self._order is not None:
            self._order.specimen = fields
        else:
            self._before = fields
            if self._specimen_first:
                self._order, self._container = None, NONE
            elif self._order is not None:
                self._order.specimen = fields
        self._about_specimen = behind or self._specimen_first

    def meet_container(self, fields: Fields) -> None:
        self._container = fields

    def meet_observation(self, fields: Fields) -> None:
        self._order = self._order or self._begin(NONE)
        self._order.observations.append(Observation(fields, self._about_specimen))

    def meet_participation(self, fields: Fields) -> None:
        if self._order is not None and self._order.observations:
            self._order.observations[-1].device = self._order.observations[-1].device or fields[10]

    def meet_device(self, fields: Fields) -> None:
        """DEV stands at the end, for the whole message."""
        for order in (*self.found, *self._of_patient):
            for one in order.observations:
                one.device = one.device or fields[2]


_MEETING = {
    "PID": _Walk.meet_patient,
    "PV1": _Walk.meet_visit,
    "OBR": _Walk.meet_order,
    "SPM": _Walk.meet_specimen,
    "SAC": _Walk.meet_container,
    "OBX": _Walk.meet_observation,
    "PRT": _Walk.meet_participation,
    "DEV": _Walk.meet_device,
}
