"""Types of columns that SQLite and PostgreSQL must be told differently."""

from sqlalchemy import BigInteger, Integer, String, TypeDecorator
from sqlalchemy.engine import Dialect

# SQLite makes a row number of INTEGER only; elsewhere 32 bits would not last.
NUMBER = BigInteger().with_variant(Integer, "sqlite")


class _WithoutNul(TypeDecorator[str]):
    """Text for PostgreSQL, which takes no NUL: a feed may hold one, and must not be stopped by it. U+E000 marks what stands for one."""

    impl = String
    cache_ok = True

    def process_bind_param(self, value: str | None, dialect: Dialect) -> str | None:
        return value and value.replace("\ue000", "\ue000e").replace("\0", "\ue0000")

    def process_result_value(self, value: str | None, dialect: Dialect) -> str | None:
        return value and value.replace("\ue0000", "\0").replace("\ue000e", "\ue000")


TEXT = String().with_variant(_WithoutNul(), "postgresql")
