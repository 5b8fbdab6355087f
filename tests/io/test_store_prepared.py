"""A prepared statement does what Core does with it, and its errors are those of the engine."""

from collections.abc import Iterator
from pathlib import Path

import pytest
from sqlalchemy import Connection, bindparam, insert, select, update
from sqlalchemy.exc import DBAPIError

from pbm.io.store_engine import writing_engine
from pbm.io.store_prepared import Prepared, PreparedQuestion
from pbm.io.store_schema import metadata, tallies

INSERT = insert(tallies)
ADD = update(tallies).where(tallies.c.reason == bindparam("of")).values(count=tallies.c.count + bindparam("more"))
ASK = select(tallies.c.reason, tallies.c.count).where(
    tallies.c.reason.in_(bindparam("reasons", expanding=True)), tallies.c.count > 1
)
ROWS = [{"reason": f"reason {n}", "count": n} for n in range(40)]


@pytest.fixture
def connection(tmp_path: Path) -> Iterator[Connection]:
    engine = writing_engine(tmp_path / "a.sqlite")
    with engine.connect() as opened:
        metadata.create_all(opened)
        opened.commit()
        yield opened
    engine.dispose()


def test_rows_are_inserted_and_changed_as_by_core(connection: Connection) -> None:
    with connection.begin():
        assert Prepared(INSERT).run(connection, ROWS) == 40
        add = Prepared(ADD)
        assert add.run(connection, [{"of": "reason 3", "more": 5}]) == 1
        assert add.run(connection, [{"of": "nothing", "more": 5}]) == 0
        assert add.run(connection, [{"more": 1, "of": "reason 4"}, {"of": "reason 5", "more": 1}]) == 2
    found = connection.execute(select(tallies).order_by(tallies.c.count, tallies.c.reason)).all()
    added = {"reason 3": 5, "reason 4": 1, "reason 5": 1}
    assert {tuple(row) for row in found} == {(f"reason {n}", n + added.get(f"reason {n}", 0)) for n in range(40)}


@pytest.mark.parametrize("count", [1, 2, 3, 4, 5, 17, 40])
def test_a_question_about_a_list_of_any_length_finds_what_core_finds(connection: Connection, count: int) -> None:
    with connection.begin():
        Prepared(INSERT).run(connection, ROWS)
        asked, reasons = PreparedQuestion(ASK), [str(row["reason"]) for row in ROWS[:count]]
        for _ in range(2):
            assert list(asked.ask(connection, reasons=reasons)) == [
                tuple(row) for row in connection.execute(ASK, {"reasons": reasons})
            ]


def test_what_is_prepared_belongs_to_the_transaction(connection: Connection) -> None:
    with pytest.raises(ZeroDivisionError), connection.begin():
        Prepared(INSERT).run(connection, ROWS)
        raise ZeroDivisionError
    assert connection.execute(select(tallies)).all() == []


def test_an_error_is_the_engines_and_repeats_no_value(connection: Connection) -> None:
    with pytest.raises(DBAPIError) as raised, connection.begin():
        Prepared(INSERT).run(connection, [{"reason": "a secret", "count": 1}] * 2)
    assert "secret" not in str(raised.value)
    assert getattr(raised.value.orig, "sqlite_errorname", "").startswith("SQLITE_CONSTRAINT")
