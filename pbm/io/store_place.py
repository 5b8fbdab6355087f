"""Where a laboratory's store is: a file of SQLite in its folder, or the PostgreSQL database that lab.toml names."""

from pathlib import Path

from sqlalchemy import URL, make_url

Place = Path | URL  # a URL is written without its password


def store_place(written: str | None, file: Path) -> Place:
    """The place of the store.

    Parameters
    ----------
    written
        `store` of lab.toml.
    file
        Where the store is if that is not given.
    """
    return file if written is None else make_url(written).set(drivername="postgresql+psycopg")


def in_words(place: Place) -> str:
    """The place for people: no password, and as it is written in lab.toml."""
    return str(place) if isinstance(place, Path) else str(place.set(drivername="postgresql"))
