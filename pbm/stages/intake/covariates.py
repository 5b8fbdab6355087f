"""What the history keeps beside a result. A patient is kept as a keyed one-way token and an age only where it is one: no name, number or
birth date of a patient is stored.
"""

import hashlib
import re
from collections.abc import Callable
from functools import lru_cache

import pyarrow as pa

from pbm.records.intake import COVARIATES
from pbm.stages.intake.sieve import Codes, Sieve

# "61", "61 Y", "3.5 months"; a date has more digits or other signs.
_AGE = re.compile(r"\d{1,3}([.,]\d+)?( ?[A-Za-z]{1,6})?")

_REMEMBERED = 65_536  # tokens of patients: most come again within days


class Covariates:
    """Reads the covariates of one extract.

    Attributes
    ----------
    ages_refused
        Rows in which the column of ages holds something else; it was not kept.
    """

    def __init__(self, patient_key: bytes) -> None:
        self.ages_refused = 0
        self._key = patient_key
        self._token = lru_cache(_REMEMBERED)(self._token_of)

    def kept(self, sieve: Sieve, rows: Codes) -> list[pa.Array]:
        """The covariates of some rows, in the order of `COVARIATES`; "" where there is none."""
        ways: dict[str, Callable[[Sieve, Codes], pa.Array]] = {"patient": self._patients, "age": self._ages}
        return [
            ways[role](sieve, rows) if role in ways and sieve.has(role) else sieve.trimmed(role, rows)
            for role in COVARIATES
        ]

    def _patients(self, sieve: Sieve, rows: Codes) -> pa.Array:
        codes, texts = sieve.encoded("patient")
        return pa.array([self._token(text) for text in texts], pa.string()).take(pa.array(codes[rows]))

    def _ages(self, sieve: Sieve, rows: Codes) -> pa.Array:
        codes, texts = sieve.encoded("age")
        self.ages_refused += int(sieve.where("age", lambda text: bool(text) and not _AGE.fullmatch(text))[rows].sum())
        return pa.array([text if _AGE.fullmatch(text) else "" for text in texts], pa.string()).take(
            pa.array(codes[rows])
        )

    def _token_of(self, patient: str) -> str:
        return hashlib.blake2b(patient.encode(), digest_size=8, key=self._key).hexdigest() if patient else ""
