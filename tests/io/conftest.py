"""Where the stores of these tests are."""

from pathlib import Path

import pytest

from pbm.io.store_place import Place, store_place


@pytest.fixture(params=["sqlite", "postgresql"])
def place(request: pytest.FixtureRequest, tmp_path: Path) -> Place:
    """The place of a new store, in each kind of database."""
    written = request.getfixturevalue("postgresql_server").new_database() if request.param == "postgresql" else None
    return store_place(written, tmp_path / "watch.sqlite")
