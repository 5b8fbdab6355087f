"""What the history keeps beside a result. A patient is kept as a keyed one-way token, sex as a letter and age as a band: no name, number,
birth date or exact age of a patient is stored.
"""

import hashlib
from collections import Counter
from collections.abc import Callable
from functools import lru_cache

import numpy as np
import pyarrow as pa

from pbm.records.intake import COVARIATES
from pbm.records.sex_and_age import read_age_band, read_sex
from pbm.stages.intake.sieve import Codes, Sieve

_REMEMBERED = 65_536  # tokens of patients: most come again within days


class Covariates:
    """Reads the covariates of one extract.

    Attributes
    ----------
    not_read
        Rows whose column "sex" or "age" holds something else; it was not kept.
    """

    def __init__(self, patient_key: bytes) -> None:
        self.not_read: Counter[str] = Counter()
        self._key = patient_key
        self._token = lru_cache(_REMEMBERED)(self._token_of)

    def kept(self, sieve: Sieve, rows: Codes) -> list[pa.Array]:
        """The covariates of some rows, in the order of `COVARIATES`; "" where there is none."""
        return [self._column(role, sieve, rows) for role in COVARIATES]

    def _column(self, role: str, sieve: Sieve, rows: Codes) -> pa.Array:
        ways: dict[str, Callable[[str], str]] = {"patient": self._token, "sex": read_sex, "age": read_age_band}
        if role not in ways or not sieve.has(role):
            return sieve.trimmed(role, rows)
        codes, texts = sieve.encoded(role)
        kept = [ways[role](text) for text in texts]
        lost = np.array([bool(text) and not read for text, read in zip(texts, kept, strict=True)], np.bool_)
        self.not_read[role] += int(lost[codes[rows]].sum())
        return pa.array(kept, pa.string()).take(pa.array(codes[rows]))

    def _token_of(self, patient: str) -> str:
        return hashlib.blake2b(patient.encode(), digest_size=8, key=self._key).hexdigest() if patient else ""
