"""Who is measured: the places of each ward, the patients who hold them from day to day, and each patient's own set points."""

from dataclasses import dataclass
from datetime import date, timedelta

import numpy as np
import numpy.typing as npt

from synthetic_streams.physiology import KEYS, SEVERE_FACTOR, SEVERE_SHARE, correlated
from synthetic_streams.seeds import child
from synthetic_streams.wards import WARDS, Ward

Ints = npt.NDArray[np.int64]
Floats = npt.NDArray[np.float64]

_BIRTHDAYS_APART = 37
_ODD = np.uint64(0x9E3779B97F4A7C15)


@dataclass(frozen=True, slots=True)
class Patients:
    """Everybody who is ever measured; one element (or row) a patient.

    Attributes
    ----------
    ward
        Index into `WARDS`.
    male
        bool.
    age
        Years.
    severity
        Factor on the distance from the ward's centre.
    set_point
        Standard normal, correlated; shape (patients, analytes).
    condition
        Uniform on [0, 1): below an analyte's share the patient has its condition; shape (patients, analytes).
    token
        Opaque, as exported.
    """

    ward: Ints
    male: npt.NDArray[np.bool_]
    age: Ints
    severity: Floats
    set_point: Floats
    condition: Floats
    token: npt.NDArray[np.object_]


def occupants(ward: Ward, days: int, rng: np.random.Generator) -> Ints:
    """Number of the patient in each place on each day, counted from 0 within the ward; shape (places, days)."""
    newcomer = rng.random((ward.places, days)) < 1 / ward.stay
    newcomer[:, 0] = True
    return np.cumsum(newcomer).reshape(newcomer.shape) - 1


def admit(ward: Ints, seed: int) -> Patients:
    """Invent the patients whose wards are given.

    Parameters
    ----------
    ward
        Index into `WARDS` of each patient.
    seed
        Master seed.
    """
    rng = child(seed, "patients")
    count = len(ward)
    ages = np.array([w.age for w in WARDS])[ward]
    return Patients(
        ward=ward,
        male=rng.random(count) < 0.5,
        age=np.clip(rng.normal(ages[:, 0], ages[:, 1]), 16, 101).astype(np.int64),
        severity=np.where(rng.random(count) < SEVERE_SHARE, SEVERE_FACTOR, 1.0),
        set_point=correlated(rng, count),
        condition=rng.random((count, len(KEYS))),
        token=_tokens(count, rng),
    )


def born(age: int, number: int, day: date) -> date:
    """When the patient of that number was born, who has that age in whole years on a day and in the two weeks before it.

    The next birthday lies 1 to 350 days ahead, as the number says.
    """
    birthday = day + timedelta(1 + number * _BIRTHDAYS_APART % 350)
    return date(birthday.year - age - 1, birthday.month, min(birthday.day, 28) if birthday.month == 2 else birthday.day)


def _tokens(count: int, rng: np.random.Generator) -> npt.NDArray[np.object_]:
    """Distinct tokens that say nothing: the running number, scattered over 40 bits by an odd factor."""
    start = rng.integers(1 << 40, dtype=np.uint64)
    scattered = (np.arange(count, dtype=np.uint64) * _ODD + start) % np.uint64(1 << 40)
    return np.array([f"{token:010x}" for token in scattered.tolist()], dtype=object)
