"""A stream: one analyte on one analyser, its name (`sodium@line-2`) and its history in columns."""

from dataclasses import dataclass, fields
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from pbm.errors import InputError

POOLED = "pooled"  # the analyser of a laboratory whose extract does not tell analysers apart
LONGEST_ANALYSER = 60
RERUN_HOURS = 24  # a further result of a specimen within so many hours of one that counts is a rerun


class StreamName(NamedTuple):
    """Analyte and analyser, written `analyte@analyser`."""

    analyte: str
    analyser: str

    @classmethod
    def parse(cls, text: str) -> "StreamName":
        """Read `analyte@analyser`.

        Raises
        ------
        InputError
            If either part is missing.
        """
        analyte, at, analyser = text.partition("@")
        if not (analyte and at and analyser):
            raise InputError(
                f'"{text}" is not the name of a stream: write analyte@analyser, for example sodium@line-2.'
            )
        return cls(analyte, analyser)

    def __str__(self) -> str:
        return f"{self.analyte}@{self.analyser}"


@dataclass(frozen=True, slots=True)
class StreamHistory:
    """The results of one stream in order of time; one array element per offered result.

    Attributes
    ----------
    name
        The stream.
    time
        int64, UTC microseconds since 1970, not decreasing.
    value
        float64, in the stream's unit; for a censored result the limit that was printed.
    censor
        int8: -1 for "<v", +1 for ">v", 0.
    specimen, ward
        Text, "" where not given.
    sex, age
        "F" or "M", and one of `records.sex_and_age.AGE_BANDS`; "" where not given or not known.
    """

    name: StreamName
    time: npt.NDArray[np.int64]
    value: npt.NDArray[np.float64]
    censor: npt.NDArray[np.int8]
    specimen: npt.NDArray[np.object_]
    ward: npt.NDArray[np.object_]
    sex: npt.NDArray[np.object_]
    age: npt.NDArray[np.object_]

    def __len__(self) -> int:
        return len(self.time)

    def rows(self, chosen: Any) -> "StreamHistory":
        """The same stream with a subset of its rows (slice, mask or index)."""
        columns = {f.name: getattr(self, f.name)[chosen] for f in fields(self) if f.name != "name"}
        return StreamHistory(name=self.name, **columns)
