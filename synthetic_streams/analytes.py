"""What is measured and how well: unit, reported step, measuring range, TEa, analytic SD, controls, codes and analysers.

TEa follows 42 CFR 493.931, .933 and .941 in SI units (from memory; MCV is not regulated, 5 % is this laboratory's own choice). Analytic
SDs are of the usual order of magnitude, for demonstration only. LOINC codes are those of the reported property.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

CHEMISTRY = ("line-1", "line-2")
HAEMATOLOGY = ("haem-1",)
IMMUNOASSAY = ("immuno-1",)


@dataclass(frozen=True, slots=True)
class Analyte:
    """One measurand as this laboratory measures and reports it.

    Attributes
    ----------
    key, code, spellings, title, loinc
        Name in `lab.toml`, in the export, other spellings in the export, in messages, and the LOINC code.
    unit, decimals
        Unit and number of decimals reported.
    low, high
        Measuring range; beyond it a result is reported as ``<low`` or ``>high``.
    tea_absolute, tea_percent
        Allowable total error; the greater counts.
    sd_absolute, cv_percent
        Analytic SD: sqrt(absolute^2 + (cv x)^2).
    levels
        Means of the two control materials.
    panel, lines, delay
        Tests asked for together; analysers that measure it; seconds from loading to result.
    """

    key: str
    code: str
    spellings: tuple[str, ...]
    title: str
    loinc: str
    unit: str
    decimals: int
    low: float
    high: float
    tea_absolute: float
    tea_percent: float
    sd_absolute: float
    cv_percent: float
    levels: tuple[float, float]
    panel: str
    lines: tuple[str, ...]
    delay: int

    @property
    def step(self) -> float:
        """Resolution in which results are reported."""
        return float(f"1e-{self.decimals}")

    def tea(self, value: Floats) -> Floats:
        """Allowable total error at each value."""
        return np.maximum(self.tea_absolute, np.abs(value) * (self.tea_percent / 100))

    def sd(self, value: Floats) -> Floats:
        """Analytic SD at each value."""
        return np.hypot(self.sd_absolute, value * (self.cv_percent / 100))


ANALYTES = (
    Analyte("sodium", "NA", ("Na",), "Sodium", "2951-2", "mmol/L", 0, 80, 200, 4, 0, 0.9, 0, (118, 150),
            "electrolytes", CHEMISTRY, 60),
    Analyte("potassium", "K", (), "Potassium", "2823-3", "mmol/L", 1, 1.0, 10.0, 0.3, 0, 0.03, 0.8, (3.0, 6.2),
            "electrolytes", CHEMISTRY, 60),
    Analyte("chloride", "CL", (), "Chloride", "2075-0", "mmol/L", 0, 50, 200, 0, 5, 0.8, 0, (86, 115),
            "electrolytes", CHEMISTRY, 60),
    Analyte("calcium", "CA", (), "Calcium", "2000-8", "mmol/L", 2, 0.50, 5.00, 0.25, 0, 0.01, 1.1, (1.65, 2.95),
            "bone", CHEMISTRY, 540),
    Analyte("albumin", "ALB", (), "Albumin", "1751-7", "g/L", 0, 5, 80, 0, 8, 0.4, 1.2, (25, 44),
            "bone", CHEMISTRY, 560),
    Analyte("total_protein", "TP", (), "Total protein", "2885-2", "g/L", 0, 10, 150, 0, 8, 0.4, 1.1, (45, 72),
            "bone", CHEMISTRY, 580),
    Analyte("creatinine", "CREA", (), "Creatinine", "14682-9", "umol/L", 0, 10, 2700, 18, 10, 1.2, 1.8, (75, 480),
            "renal", CHEMISTRY, 600),
    Analyte("glucose", "GLUC", (), "Glucose", "14749-6", "mmol/L", 1, 0.6, 41.6, 0.33, 8, 0.04, 1.2, (3.3, 15.5),
            "glucose", CHEMISTRY, 570),
    Analyte("alt", "ALT", (), "Alanine aminotransferase", "1742-6", "U/L", 0, 5, 2000, 6, 15, 0.7, 2.3, (28, 120),
            "liver", CHEMISTRY, 590),
    Analyte("tsh", "TSH", (), "Thyrotropin", "3016-3", "mIU/L", 2, 0.01, 100.0, 0.2, 20, 0.006, 3.0, (0.55, 7.50),
            "thyroid", IMMUNOASSAY, 1080),
    Analyte("haemoglobin", "HGB", (), "Haemoglobin", "718-7", "g/L", 0, 10, 250, 0, 4, 0.3, 0.75, (75, 140),
            "blood count", HAEMATOLOGY, 45),
    Analyte("mcv", "MCV", (), "Mean corpuscular volume", "787-2", "fL", 1, 40.0, 180.0, 0, 5, 0, 0.5, (76.0, 92.0),
            "blood count", HAEMATOLOGY, 45),
    Analyte("platelets", "PLT", (), "Platelets", "777-3", "10*9/L", 0, 5, 3000, 0, 25, 2.0, 2.5, (70, 240),
            "blood count", HAEMATOLOGY, 45),
)  # fmt: skip

BY_KEY = {analyte.key: analyte for analyte in ANALYTES}
PANELS = tuple(dict.fromkeys(analyte.panel for analyte in ANALYTES))
STREAMS = tuple((analyte, line) for analyte in ANALYTES for line in analyte.lines)


def stream_name(analyte: Analyte, line: str) -> str:
    """The stream's name as written everywhere: ``sodium@line-2``."""
    return f"{analyte.key}@{line}"


def known(key: str, line: str) -> Analyte:
    """The analyte of a stream.

    Raises
    ------
    ValueError
        If the laboratory does not measure this stream.
    """
    analyte = BY_KEY.get(key)
    if analyte is None or line not in analyte.lines:
        raise ValueError(f"{key}@{line} is not a stream of this laboratory")
    return analyte
