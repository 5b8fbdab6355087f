"""Tables of the store that `pbm watch` writes. Times are UTC microseconds since 1970; the reference page is made from these comments."""

from sqlalchemy import (
    DDL,
    BigInteger,
    Boolean,
    Column,
    Float,
    ForeignKey,
    Index,
    Integer,
    LargeBinary,
    MetaData,
    SmallInteger,
    Table,
    UniqueConstraint,
    event,
    literal_column,
)

from pbm.io.store_types import NUMBER, TEXT

SCHEMA_VERSION = 2

metadata = MetaData()

schema = Table(
    "schema",
    metadata,
    Column(
        "version",
        Integer,
        primary_key=True,
        autoincrement=False,
        comment="layout of these tables; another version of pbm may need another",
    ),
    comment="One row.",
)

streams = Table(
    "streams",
    metadata,
    Column("id", NUMBER, primary_key=True, autoincrement=False),
    Column("analyte", TEXT, nullable=False),
    Column("analyser", TEXT, nullable=False),
    Column("newest", TEXT, nullable=False, comment="the newest times that its monitors have taken, ascending, as JSON"),
    UniqueConstraint("analyte", "analyser"),
    comment="Every stream met, watched or not.",
)

results = Table(
    "results",
    metadata,
    Column("seq", NUMBER, primary_key=True, autoincrement=False, comment="order of arrival, from 1"),
    Column("stream", ForeignKey("streams.id"), nullable=False),
    Column("specimen", TEXT, nullable=False, comment='"" where not given'),
    Column("time", BigInteger, nullable=False),
    Column("value", Float, nullable=False, comment="in the unit of the stream; of a censored result the limit printed"),
    Column("censor", SmallInteger, nullable=False, comment='-1 for "<", +1 for ">", else 0'),
    Column("ward", TEXT, nullable=False, comment='"" where not given'),
    Column("patient", TEXT, nullable=False, comment='keyed token where repeats of a patient are limited, else ""'),
    Column("left_out", TEXT, nullable=False, comment='why no monitor may take it (a rerun, too late), else ""'),
    Column("feed", ForeignKey("feeds.id"), nullable=False),
    Column("edition", Integer, nullable=False, comment="of the feed: a feed begun anew has the next number"),
    Column("sex", TEXT, nullable=False, comment='F or M, "" where not known'),
    Column("age", TEXT, nullable=False, comment='age band, "" where not known'),
    Index("results_of_a_stream", "stream", "seq"),
    comment="Every patient result, once.",
)

# Results without a specimen may be alike and yet two patients'. The text stands in the index literally: both databases then know when a
# question is about it.
NAMED = results.c.specimen != literal_column("''")
UNNAMED = results.c.specimen == literal_column("''")
VISITS = results.c.patient != literal_column("''")
Index(
    "one_result_once",
    *(results.c[name] for name in ("specimen", "stream", "time", "value", "censor")),
    unique=True,
    sqlite_where=NAMED,
    postgresql_where=NAMED,
)
Index("results_of_a_patient", results.c.patient, sqlite_where=VISITS, postgresql_where=VISITS)
Index("results_without_specimen", results.c.time, sqlite_where=UNNAMED, postgresql_where=UNNAMED)

monitors = Table(
    "monitors",
    metadata,
    Column("stream", ForeignKey("streams.id"), primary_key=True),
    Column(
        "monitor",
        Integer,
        primary_key=True,
        autoincrement=False,
        comment="place of the monitor in the stream's plan, from 0",
    ),
    Column("settings", TEXT, nullable=False, comment="SHA-256 of the settings under which the state goes on"),
    Column("state", LargeBinary, nullable=False),
    Column("taken", BigInteger, nullable=False, comment="results offered"),
    Column(
        "admitted",
        BigInteger,
        nullable=False,
        comment="results that the statistic has taken since it began, or began afresh",
    ),
    Column("needed", Integer, nullable=False, comment="admitted results before the statistic is judged"),
    Column("value", Float, comment="the statistic, on its own scale; empty while not judged"),
    Column("episode", SmallInteger, nullable=False, comment="+1 open alarm above, -1 below, 0 armed"),
    comment="The state of every monitor after the last result.",
)

alarms = Table(
    "alarms",
    metadata,
    Column("id", NUMBER, primary_key=True, autoincrement=False, comment="order of opening, from 1"),
    Column("stream", ForeignKey("streams.id"), nullable=False),
    Column("monitor", Integer, nullable=False),
    Column("seq", ForeignKey("results.seq"), nullable=False, comment="the result that opened the episode"),
    Column("time", BigInteger, nullable=False),
    Column("specimen", TEXT, nullable=False),
    Column("side", TEXT, nullable=False, comment="HIGH or LOW"),
    Column("statistic", TEXT, nullable=False),
    Column("value", Float, nullable=False, comment="the statistic, on its own scale"),
    Column("control_limit", Float, nullable=False, comment="the limit it crossed, on its own scale"),
    Column(
        "shown",
        Float,
        nullable=False,
        comment="the same in the unit of the stream, where the statistic is a level of results",
    ),
    Column("shown_limit", Float, nullable=False),
    Column(
        "onset",
        BigInteger,
        comment="most likely first affected result; empty where the statistic does not tell the side",
    ),
    Column("onset_low", BigInteger, comment="90 % set of the onset"),
    Column("onset_high", BigInteger),
    Column("results", Integer, comment="results offered from the onset to the alarm"),
    Column("size", Float, comment="estimated error in the unit of the stream"),
    Column("size_in_tea", Float),
    Column("expected_unreliable", Float),
    Column("last_control", BigInteger, comment="last control event before the alarm: recorded, or else scheduled"),
    Column("plan_sha256", TEXT, nullable=False, comment="the plan in force"),
    Column("shadow", Boolean, nullable=False, comment="kept off the bench: the watch ran on trial"),
    Column("last_control_passed", Boolean, comment="whether its controls were accepted; empty where that is not known"),
    UniqueConstraint("stream", "monitor", "seq"),
    Index("alarms_of_a_result", "seq"),
    comment="One row for each episode, when it opens.",
)

feeds = Table(
    "feeds",
    metadata,
    Column("id", NUMBER, primary_key=True, autoincrement=False),
    Column("source", TEXT, nullable=False, unique=True),
    Column("position", TEXT, nullable=False, comment="where to go on; kept in the same transaction as the results"),
    Column("delivered", BigInteger, nullable=False, comment="pieces that it brought since the store began"),
    Column("removed", BigInteger, nullable=False, comment="of its results and pieces set aside: removed as too old"),
    comment="Every feed, and how far it was read; beside them `clock` (when everything was last heard), `waiting` (results that wait "
    "for their order), `shadow` (what a trial has met) and `alarms out` (the last alarm that is out).",
)

set_aside = Table(
    "set_aside",
    metadata,
    Column("id", NUMBER, primary_key=True, autoincrement=False),
    Column("feed", ForeignKey("feeds.id"), nullable=False),
    Column("place", BigInteger, nullable=False, comment="line of the feed"),
    Column("reason", TEXT, nullable=False),
    Column("found", TEXT, nullable=False, comment="the field at fault, never the whole line"),
    Column("stream", TEXT, nullable=False, comment="as far as known"),
    comment="What a feed held that was not taken as a result.",
)

tallies = Table(
    "tallies",
    metadata,
    Column("reason", TEXT, primary_key=True),
    Column("count", BigInteger, nullable=False),
    comment="How much was set aside for each reason since the store began, duplicates among them.",
)

audit = Table(
    "audit",
    metadata,
    Column("id", NUMBER, primary_key=True, autoincrement=False),
    Column("at", BigInteger, nullable=False, comment="clock of the computer"),
    Column("what", TEXT, nullable=False),
    Column("plan_before", TEXT, nullable=False, comment='SHA-256 of the plan until then, "" if none'),
    Column("plan_after", TEXT, nullable=False),
    Column("detail", TEXT, nullable=False),
    Column("hash", TEXT, nullable=False, comment="SHA-256 over the entry and the hash of the one before"),
    comment="What was done to the watch, never changed afterwards.",
)

_NEVER_CHANGED = (
    "CREATE TRIGGER audit_is_never_changed BEFORE UPDATE ON audit BEGIN SELECT RAISE(ABORT, 'the audit is never changed'); END",
    "CREATE TRIGGER audit_is_never_cut BEFORE DELETE ON audit BEGIN SELECT RAISE(ABORT, 'the audit is never changed'); END",
)
_NEVER_CHANGED_IN_POSTGRESQL = (
    "CREATE FUNCTION audit_stays() RETURNS trigger LANGUAGE plpgsql AS $$ BEGIN RAISE EXCEPTION 'the audit is never changed'; END $$",
    "CREATE TRIGGER audit_is_never_changed BEFORE UPDATE OR DELETE OR TRUNCATE ON audit EXECUTE FUNCTION audit_stays()",
)
for _dialect, _statements in (("sqlite", _NEVER_CHANGED), ("postgresql", _NEVER_CHANGED_IN_POSTGRESQL)):
    for _statement in _statements:
        event.listen(audit, "after_create", DDL(_statement).execute_if(dialect=_dialect))  # type: ignore[no-untyped-call]

audit_head = Table(
    "audit_head",
    metadata,
    Column("entries", NUMBER, primary_key=True, autoincrement=False, comment="how many the audit has"),
    Column("hash", TEXT, nullable=False, comment="of the last one"),
    comment="One row: where the audit ends, so that a cut end is noticed.",
)

messages = Table(
    "messages",
    metadata,
    Column("sender", TEXT, primary_key=True, comment="sending application and facility"),
    Column("control_id", TEXT, primary_key=True),
    Column("sha256", LargeBinary, primary_key=True, comment="of the content"),
    Column("code", TEXT, nullable=False, comment="the acknowledgement that was answered"),
    Column("at", BigInteger, nullable=False, comment="when it came, by the clock of the computer"),
    Column("seq", BigInteger, nullable=False, comment="the last result that was kept before its answer"),
    comment="Every HL7 message answered: sent again, it gets the same answer and counts once.",
    sqlite_with_rowid=False,
)

annotations = Table(
    "annotations",
    metadata,
    Column("id", NUMBER, primary_key=True, autoincrement=False),
    Column("stream", ForeignKey("streams.id"), nullable=False),
    Column("specimen", TEXT, nullable=False),
    Column("time", BigInteger, nullable=False, comment="when the result was measured, as the feed says"),
    Column("status", TEXT, nullable=False, comment="C corrected, D deleted, W wrong"),
    Column("value", TEXT, nullable=False, comment='as corrected, as written; "" where none is given'),
    Column("at", BigInteger, nullable=False, comment="when the word came, by the clock of the computer"),
    Column("feed", ForeignKey("feeds.id"), nullable=False),
    Column("place", BigInteger, nullable=False),
    Index("annotations_of_a_specimen", "specimen"),
    comment="Later words on results. The result as first reported stays as it is.",
)

events = Table(
    "events",
    metadata,
    Column("id", NUMBER, primary_key=True, autoincrement=False),
    Column("time", BigInteger, nullable=False, comment="when it happened"),
    Column(
        "kind",
        TEXT,
        nullable=False,
        comment="calibration, reagent lot, maintenance, control accepted or rejected, note",
    ),
    Column("analyte", TEXT, nullable=False, comment='"" for every analyte of the analyser'),
    Column("analyser", TEXT, nullable=False, comment='"" for every analyser'),
    Column("detail", TEXT, nullable=False, comment="lot, control material and value, or words of a person"),
    Column("source", TEXT, nullable=False, comment="the feed that brought it, or who entered it"),
    Column("at", BigInteger, nullable=False, comment="when it came, by the clock of the computer"),
    Column("seq", BigInteger, nullable=False, comment="the last result that came before it"),
    Column("effect", TEXT, nullable=False, comment='what the watch did because of it, "" if nothing'),
    comment="Laboratory events.",
)

notices = Table(
    "notices",
    metadata,
    Column("id", NUMBER, primary_key=True, autoincrement=False),
    Column("time", BigInteger, nullable=False, comment="when it began"),
    Column("kind", TEXT, nullable=False, comment="quiet, clock skew and the like"),
    Column("analyte", TEXT, nullable=False, comment='"" for every analyte of the analyser'),
    Column("analyser", TEXT, nullable=False, comment='"" for every analyser'),
    Column("text", TEXT, nullable=False),
    Column("closed_at", BigInteger, comment="when it ended; empty while it lasts"),
    UniqueConstraint("time", "kind", "analyte", "analyser"),
    comment="What the watch tells beside alarms.",
)

heartbeat = Table(
    "heartbeat",
    metadata,
    Column("started", BigInteger, primary_key=True, autoincrement=False, comment="when the watch began"),
    Column("at", BigInteger, nullable=False, comment="when it was last alive, by the clock of the computer"),
    Column("pid", Integer, nullable=False),
    Column("last_result", BigInteger, comment="time of the newest result kept"),
    Column("last_arrival", BigInteger, comment="when the last result came, by the clock of the computer"),
    Column("state", TEXT, nullable=False, comment="of feeds and streams, as JSON"),
    comment="One row: the sign of life of the watch.",
)
