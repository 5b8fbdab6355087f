"""Specimens in order of arrival: a Poisson number from each ward in each hour, from a patient who holds a place there that day."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from synthetic_streams.analytes import CHEMISTRY, PANELS, Analyte
from synthetic_streams.clock import HOUR, SECOND, Hours
from synthetic_streams.patients import Patients, admit, occupants
from synthetic_streams.physiology import COLUMN, PHYSIOLOGY, centre_and_spread, correlated, sex_and_age_effect
from synthetic_streams.seeds import child
from synthetic_streams.wards import WARDS, Ward

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]

MEAN_AGES = np.array([ward.age[0] for ward in WARDS])


@dataclass(frozen=True, slots=True)
class Draws:
    """All specimens in order of arrival; one element (or row) a specimen.

    Attributes
    ----------
    time
        int64, UTC microseconds: loaded on the analyser.
    ward, patient
        Index into `WARDS`; index into `patients`.
    chemistry_line
        Index into `CHEMISTRY` of the line that measures its chemistry panel.
    asked
        Uniform on [0, 1) per panel: a test is asked for if it lies below the ward's share; shape (specimens, panels).
    fluctuation
        Standard normal, correlated: the patient's distance from the set point; shape (specimens, analytes).
    specimen
        Specimen number, as exported.
    patients
        The people behind them.
    """

    time: Ints
    ward: Ints
    patient: Ints
    chemistry_line: Ints
    asked: Floats
    fluctuation: Floats
    specimen: npt.NDArray[np.object_]
    patients: Patients

    def measured(self, analyte: Analyte, line: str) -> Ints:
        """Index of the specimens in which a line measures an analyte, in order of arrival."""
        share = np.array([ward.asks[analyte.key] for ward in WARDS])[self.ward]
        wanted = self.asked[:, PANELS.index(analyte.panel)] < share
        if analyte.lines == CHEMISTRY:
            wanted &= self.chemistry_line == CHEMISTRY.index(line)
        return np.flatnonzero(wanted)

    def true_values(self, analyte: Analyte, rows: Ints) -> Floats:
        """The patients' true values in chosen specimens, in the analyte's unit."""
        physiology, column = PHYSIOLOGY[analyte.key], COLUMN[analyte.key]
        who = self.patient[rows]
        people = self.patients
        centre, spread = centre_and_spread(analyte.key, self.ward[rows])
        share, shift, factor = physiology.condition
        ill = people.condition[who, column] < share
        older = people.age[who] - MEAN_AGES[self.ward[rows]]
        centre = centre + np.where(ill, shift, 0.0) + sex_and_age_effect(analyte.key, people.male[who], older)
        steady, passing = np.sqrt(1 - physiology.within), np.sqrt(physiology.within)
        distance = steady * people.set_point[who, column] + passing * self.fluctuation[rows, column]
        value = centre + spread * np.where(ill, factor, 1.0) * people.severity[who] * distance
        return np.asarray(np.exp(value) if physiology.logarithmic else value, dtype=np.float64)


def collect(hours: Hours, volume: float, seed: int) -> Draws:
    """Draw every specimen of the given hours.

    Parameters
    ----------
    hours
        The laboratory's hours.
    volume
        Factor on the number of specimens.
    seed
        Master seed.
    """
    parts = [_of_ward(ward, hours, volume, child(seed, "draws", ward.code)) for ward in WARDS]
    heads = np.cumsum([0] + [heads for _, _, heads in parts])
    ward = np.repeat(np.arange(len(WARDS)), [len(time) for time, _, _ in parts])
    time = np.concatenate([time for time, _, _ in parts])
    patient = np.concatenate([who + first for (_, who, _), first in zip(parts, heads[:-1], strict=True)])
    order = np.argsort(time, kind="stable")
    rng = child(seed, "specimens")
    count = len(time)
    return Draws(
        time=time[order],
        ward=ward[order],
        patient=patient[order],
        chemistry_line=rng.integers(len(CHEMISTRY), size=count),
        asked=rng.random((count, len(PANELS))),
        fluctuation=correlated(rng, count),
        specimen=np.array([f"31-{number:06d}" for number in range(1, count + 1)], dtype=object),
        patients=admit(np.repeat(np.arange(len(WARDS)), np.diff(heads)), seed),
    )


def _of_ward(ward: Ward, hours: Hours, volume: float, rng: np.random.Generator) -> tuple[Ints, Ints, int]:
    """Arrival times, patients (counted within the ward) and number of patients of one ward."""
    shape = np.array(ward.by_hour) / sum(ward.by_hour)
    expected = volume * ward.per_day * np.array(ward.weekdays)[hours.weekday] * shape[hours.hour]
    hour = np.repeat(np.arange(len(expected)), rng.poisson(expected))
    time = hours.start[hour] + rng.integers(HOUR // SECOND, size=len(hour)) * SECOND
    holders = occupants(ward, int(hours.day[-1]) + 1, rng)
    who = holders[rng.integers(ward.places, size=len(hour)), hours.day[hour]]
    return time, who, int(holders[-1, -1]) + 1
