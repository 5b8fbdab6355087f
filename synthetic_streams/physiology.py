"""Patients' true values: centre and spread by ward, correlation between analytes, and how much a person varies from day to day.

true = centre(ward, sex, age) + spread(ward) * severity * (sqrt(1 - w) set point + sqrt(w) fluctuation), on a linear or a logarithmic scale;
a share of patients has a condition that moves the centre and widens the spread. Haemoglobin, creatinine and ALT differ by sex; with age
creatinine rises, albumin falls, and in men haemoglobin and ALT fall. Invented figures of the order seen in hospital populations.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from synthetic_streams.analytes import ANALYTES

Floats = npt.NDArray[np.float64]

SEVERE_SHARE = 0.08
SEVERE_FACTOR = 1.8


@dataclass(frozen=True, slots=True)
class Physiology:
    """How an analyte is distributed over patients.

    Attributes
    ----------
    logarithmic
        Whether centre and spread are those of ln(value); the centre is then given as the median.
    wards
        Centre and spread in the order of `wards.WARDS`.
    within
        Share of the variance that is one person's variation from day to day.
    condition
        Share of patients with a condition, shift of their centre (on the working scale), factor of their spread.
    male_minus_female
        Difference of centres, on the working scale.
    per_decade
        Change of the centre with ten years of age, on the working scale, for women and for men; 0 at the mean age of the ward.
    """

    logarithmic: bool
    wards: tuple[tuple[float, float], ...]
    within: float
    condition: tuple[float, float, float] = (0.0, 0.0, 1.0)
    male_minus_female: float = 0.0
    per_decade: tuple[float, float] = (0.0, 0.0)


# Order of wards:                 ED           MED          SURG         ICU          DIAL         CLINIC       GP
PHYSIOLOGY = {
    "sodium": Physiology(False, ((138.2, 3.1), (137.6, 3.6), (138.0, 3.0), (140.2, 4.4), (138.0, 2.8), (139.6, 2.3),
                                 (139.9, 2.2)), 0.35, (0.05, -5.0, 1.4)),
    "potassium": Physiology(False, ((4.05, 0.48), (4.10, 0.46), (4.10, 0.42), (4.15, 0.46), (4.95, 0.70),
                                    (4.30, 0.38), (4.40, 0.38)), 0.60),
    "chloride": Physiology(False, ((102.5, 3.6), (101.5, 4.2), (103.0, 3.6), (106.0, 5.0), (99.5, 3.2), (103.2, 2.7),
                                   (103.4, 2.6)), 0.40),
    "calcium": Physiology(False, ((2.32, 0.100), (2.28, 0.110), (2.26, 0.110), (2.16, 0.125), (2.29, 0.140),
                                  (2.34, 0.090), (2.36, 0.085)), 0.30, (0.02, 0.16, 1.3)),
    "albumin": Physiology(False, ((39.0, 4.6), (34.5, 5.2), (33.5, 5.2), (26.5, 5.0), (37.0, 3.8), (41.5, 3.4),
                                  (43.0, 3.0)), 0.15, per_decade=(-0.6, -0.6)),
    "total_protein": Physiology(False, ((69.0, 6.5), (65.0, 6.8), (62.0, 6.8), (54.0, 7.2), (66.0, 5.5), (70.5, 4.9),
                                        (71.0, 4.4)), 0.25),
    "creatinine": Physiology(True, ((84.0, 0.38), (92.0, 0.48), (80.0, 0.36), (98.0, 0.55), (640.0, 0.33),
                                    (82.0, 0.36), (78.0, 0.24)), 0.08, (0.05, 0.75, 1.3), 0.22, (0.035, 0.035)),
    "glucose": Physiology(True, ((6.3, 0.19), (6.3, 0.19), (6.4, 0.18), (7.8, 0.22), (6.3, 0.22), (5.5, 0.14),
                                 (5.3, 0.12)), 0.50, (0.16, 0.45, 2.0)),
    "alt": Physiology(True, ((26.0, 0.62), (25.0, 0.70), (26.0, 0.66), (34.0, 0.95), (15.0, 0.48), (24.0, 0.56),
                             (23.0, 0.48)), 0.08, (0.03, 1.2, 1.4), 0.25, (-0.02, -0.10)),
    "tsh": Physiology(True, ((1.60, 0.70), (1.60, 0.80), (1.60, 0.75), (1.10, 0.90), (1.90, 0.70), (1.90, 0.70),
                             (1.85, 0.60)), 0.12, (0.04, -3.6, 1.6)),
    "haemoglobin": Physiology(False, ((128.0, 18.0), (114.0, 18.0), (110.0, 17.0), (96.0, 14.0), (110.0, 12.0),
                                      (130.0, 16.0), (137.0, 12.5)), 0.08, (0.03, -18.0, 1.2), 10.0, (-0.5, -2.5)),
    "mcv": Physiology(False, ((90.0, 5.6), (90.5, 6.2), (89.5, 5.6), (91.0, 5.6), (93.0, 6.0), (90.0, 5.8),
                              (89.5, 4.8)), 0.02),
    "platelets": Physiology(True, ((240.0, 0.33), (245.0, 0.42), (265.0, 0.40), (175.0, 0.58), (200.0, 0.34),
                                   (248.0, 0.34), (250.0, 0.25)), 0.10, (0.02, -0.9, 1.4)),
}  # fmt: skip

_CORRELATIONS = {
    ("sodium", "chloride"): 0.62,
    ("sodium", "glucose"): -0.15,
    ("potassium", "creatinine"): 0.30,
    ("calcium", "albumin"): 0.55,
    ("calcium", "total_protein"): 0.40,
    ("albumin", "total_protein"): 0.62,
    ("albumin", "haemoglobin"): 0.35,
    ("creatinine", "haemoglobin"): -0.22,
    ("haemoglobin", "mcv"): 0.25,
    ("mcv", "platelets"): -0.15,
}

KEYS = tuple(analyte.key for analyte in ANALYTES)
COLUMN = {key: column for column, key in enumerate(KEYS)}


def correlation() -> Floats:
    """Correlation matrix of set points and of fluctuations, in the order of `KEYS`."""
    matrix = np.eye(len(KEYS))
    for (one, other), r in _CORRELATIONS.items():
        matrix[COLUMN[one], COLUMN[other]] = matrix[COLUMN[other], COLUMN[one]] = r
    return matrix


def correlated(rng: np.random.Generator, rows: int) -> Floats:
    """Standard normal vectors with the correlation of the analytes; shape (rows, analytes)."""
    return rng.standard_normal((rows, len(KEYS))) @ np.linalg.cholesky(correlation()).T


def centre_and_spread(key: str, ward: npt.NDArray[np.int64]) -> tuple[Floats, Floats]:
    """Centre and spread of an analyte on its working scale for each patient's ward."""
    table = np.array(PHYSIOLOGY[key].wards)
    centre = np.log(table[:, 0]) if PHYSIOLOGY[key].logarithmic else table[:, 0]
    return centre[ward], table[ward, 1]


def sex_and_age_effect(key: str, male: npt.NDArray[np.bool_], years: Floats) -> Floats:
    """What sex and age add to an analyte's centre, on its working scale.

    Parameters
    ----------
    key
        The analyte.
    male : (n,)
        Whether each patient is a man.
    years : (n,)
        How much older each patient is than the mean of the ward.
    """
    physiology = PHYSIOLOGY[key]
    of_sex = physiology.male_minus_female * (male - 0.5)
    effect: Floats = of_sex + np.array(physiology.per_decade)[male.astype(np.int64)] * years / 10
    return effect
