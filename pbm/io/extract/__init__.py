"""A history extract, CSV (plain or gzip) or Parquet -> blocks of rows as text, in bounded memory, each row with its source line."""

import hashlib
from pathlib import Path

from pbm.errors import InputError
from pbm.io.extract.columnar import ColumnarExtract
from pbm.io.extract.delimited import DelimitedExtract
from pbm.records.laboratory import Extract

__all__ = ["ColumnarExtract", "DelimitedExtract", "extract_fingerprint", "open_extract"]


def open_extract(path: Path, name: str, columns: Extract) -> DelimitedExtract | ColumnarExtract:
    """Open an extract; what it is, its first bytes tell, not its name.

    Parameters
    ----------
    path
        The file.
    name
        What it is called in the history.
    columns
        Which column holds what, from `lab.toml`.

    Raises
    ------
    InputError
        If it is missing, empty, or neither text nor Parquet, or lacks a column.
    """
    try:
        with path.open("rb") as file:
            parquet = file.read(4) == b"PAR1"
        return (ColumnarExtract if parquet else DelimitedExtract)(path, name, columns)
    except OSError as error:
        raise InputError(
            f"{path} cannot be read: {error.strerror}. An extract (CSV, CSV.gz or Parquet) was expected."
        ) from None


def extract_fingerprint(path: Path) -> str:
    """SHA-256 of the bytes of an extract, in hexadecimal.

    Raises
    ------
    InputError
        If it cannot be read.
    """
    try:
        with path.open("rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError as error:
        raise InputError(
            f"{path} cannot be read: {error.strerror}. An extract (CSV, CSV.gz or Parquet) was expected."
        ) from None
