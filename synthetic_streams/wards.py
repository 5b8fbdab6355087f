"""Where specimens come from: each ward's volume by hour and weekday, its beds or patient list, and how often it asks for a test."""

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Ward:
    """One source of specimens.

    Attributes
    ----------
    code, name
        As exported, and in words.
    patient_class
        HL7 table 0004: E emergency, I inpatient, O outpatient.
    per_day
        Expected specimens on a full day.
    weekdays
        Share of a full day on Monday ... Sunday.
    by_hour
        Weight of each local hour 0 ... 23.
    places, stay
        Beds (or people on the list) and mean days until another patient has the place.
    age
        Mean and SD in years.
    asks
        Chance that a specimen is for each test.
    """

    code: str
    name: str
    patient_class: str
    per_day: float
    weekdays: tuple[float, ...]
    by_hour: tuple[float, ...]
    places: int
    stay: float
    age: tuple[float, float]
    asks: dict[str, float]


_TESTS = ("sodium", "potassium", "chloride", "creatinine", "glucose", "calcium", "albumin", "total_protein", "alt", "tsh",
          "haemoglobin", "mcv", "platelets")  # fmt: skip


def _asks(*shares: float) -> dict[str, float]:
    return dict(zip(_TESTS, shares, strict=True))


EVERY_DAY = (1.0,) * 7
WORKING_DAYS = (1.0,) * 5 + (0.0, 0.0)

WARDS = (
    Ward(
        "ED", "emergency", "E", 170, EVERY_DAY,
        (4, 3, 3, 2, 2, 2, 3, 4, 6, 8, 10, 11, 11, 10, 10, 10, 10, 10, 10, 10, 9, 8, 7, 5),
        400, 1.0, (54, 22),
        _asks(0.98, 0.95, 0.40, 0.58, 0.38, 0.20, 0.22, 0.07, 0.22, 0.05, 0.22, 0.22, 0.22),
    ),
    Ward(
        "MED", "medical", "I", 165, (1, 1, 1, 1, 1, 0.7, 0.65),
        (1, 1, 1, 1, 2, 8, 22, 26, 18, 10, 6, 5, 4, 4, 5, 5, 4, 4, 4, 3, 3, 2, 2, 1),
        190, 6.0, (70, 15),
        _asks(0.98, 0.96, 0.26, 0.58, 0.27, 0.30, 0.33, 0.09, 0.23, 0.05, 0.26, 0.26, 0.26),
    ),
    Ward(
        "SURG", "surgical", "I", 100, (1, 1, 1, 1, 1, 0.6, 0.55),
        (1, 1, 1, 1, 2, 12, 24, 18, 8, 6, 5, 5, 5, 6, 7, 7, 6, 5, 4, 3, 3, 2, 2, 1),
        115, 5.0, (62, 17),
        _asks(0.97, 0.95, 0.28, 0.54, 0.27, 0.26, 0.32, 0.09, 0.20, 0.01, 0.30, 0.30, 0.30),
    ),
    Ward(
        "ICU", "intensive care", "I", 50, EVERY_DAY,
        (3, 2, 2, 3, 10, 9, 5, 3, 3, 3, 4, 5, 5, 3, 3, 4, 8, 6, 3, 3, 3, 4, 6, 5),
        16, 5.0, (63, 15),
        _asks(1.00, 1.00, 0.90, 0.66, 0.55, 0.70, 0.70, 0.18, 0.28, 0.01, 0.30, 0.30, 0.30),
    ),
    Ward(
        "DIAL", "dialysis", "O", 36, (1, 0, 1, 0, 1, 0, 0),
        (0, 0, 0, 0, 0, 0, 0, 6, 10, 9, 6, 3, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 0),
        96, math.inf, (66, 14),
        _asks(1.00, 1.00, 0.55, 0.85, 0.20, 0.85, 0.85, 0.28, 0.20, 0.00, 0.30, 0.30, 0.30),
    ),
    Ward(
        "CLINIC", "clinics", "O", 110, WORKING_DAYS,
        (0, 0, 0, 0, 0, 0, 0, 1, 8, 14, 16, 15, 10, 5, 2, 1, 0, 0, 0, 0, 0, 0, 0, 0),
        6_000, math.inf, (58, 17),
        _asks(0.77, 0.74, 0.08, 0.53, 0.34, 0.33, 0.38, 0.15, 0.33, 0.18, 0.20, 0.20, 0.20),
    ),
    Ward(
        # Couriers arrive about 13:00, 15:30 and 18:00; each wave is worked off within two hours.
        "GP", "general practice", "O", 305, (1.1, 1, 1, 1, 0.95, 0.1, 0),
        (0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 1, 3, 2, 18, 5, 12, 24, 6, 18, 8, 2, 0, 0, 0),
        22_000, math.inf, (57, 19),
        _asks(0.77, 0.74, 0.05, 0.53, 0.33, 0.27, 0.33, 0.13, 0.28, 0.19, 0.21, 0.21, 0.21),
    ),
)  # fmt: skip
