"""What is asked of the store before every batch, each question written out once: that costs more than asking it."""

from sqlalchemy import bindparam, select

from pbm.io.store_prepared import PreparedQuestion
from pbm.io.store_schema import NAMED, UNNAMED, VISITS, messages, results
from pbm.records.snapshot import LATE

_r, _m = results.c, messages.c

# Results of some specimens.
RUNS = PreparedQuestion(
    select(_r.stream, _r.specimen, _r.time, _r.value, _r.censor, _r.left_out).where(
        NAMED, _r.specimen.in_(bindparam("specimens", expanding=True))
    )
)
# Results without a specimen at some moments.
UNNAMED_RESULTS = PreparedQuestion(
    select(_r.stream, _r.time, _r.value, _r.censor, _r.feed, _r.edition).where(
        UNNAMED, _r.time.in_(bindparam("times", expanding=True))
    )
)
# Results that count for some patients; one that came too late counts all the same.
COUNTED_VISITS = PreparedQuestion(
    select(_r.stream, _r.patient, _r.time).where(
        VISITS, _r.patient.in_(bindparam("patients", expanding=True)), _r.left_out.in_(("", LATE))
    )
)
# Messages answered to some senders under some numbers.
ANSWERED = PreparedQuestion(
    select(_m.sender, _m.control_id, _m.sha256, _m.code).where(
        _m.sender.in_(bindparam("senders", expanding=True)), _m.control_id.in_(bindparam("control_ids", expanding=True))
    )
)
