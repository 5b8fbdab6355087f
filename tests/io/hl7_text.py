"""HL7 messages for tests, built from fields; a helper, not a test."""

from collections.abc import Sequence

from pbm.io.hl7_message import MessageReader, Received
from pbm.records.laboratory import Lab
from pbm.records.reading import Reading, SetAside

MSH = "MSH|^~\\&|LIS|TBDL|PBM|TBDL|20310302071500+0000||ORU^R01^ORU_R01|000001|P|2.5.1"
PID = "PID|1||a1b2c3^^^TBDL^PI||DOE^JANE||19601231|F|||SOME STREET 1"
PV1 = "PV1|1|I|ED"
OBR = "OBR|1|P-77|F-78|CHEM|||20310302063000+0000|||||||||||||||20310302071000+0000"
SPM = "SPM|1|31-000123||SER|||||||P"
SODIUM = "2951-2^Sodium^LN^NA^Sodium^L"


def obx(
    value: str = "138",
    kind: str = "NM",
    test: str = SODIUM,
    unit: str = "mmol/L",
    flags: str = "",
    status: str = "F",
    analyser: str = "line-2^TBDL",
    time: str = "20310302071405+0000",
) -> str:
    """One observation."""
    return f"OBX|1|{kind}|{test}||{value}|{unit}||{flags}|||{status}|||20310302063000+0000||||{analyser}|{time}"


def message(*segments: str, msh: str = MSH) -> bytes:
    """A message of these segments."""
    return "".join(f"{one}\r" for one in (msh, *segments)).encode()


def oru(*observations: str, msh: str = MSH, spm: str = SPM, pid: str = PID) -> bytes:
    """A usual message of results."""
    return message(pid, PV1, OBR, *(observations or (obx(),)), spm, msh=msh)


def received(lab: Lab, content: bytes, place: int = 7, at: int = 5) -> Received:
    """What a laboratory makes of a message."""
    return MessageReader(lab).read(content, place, at)


def readings(lab: Lab, content: bytes) -> list[Reading]:
    """Its readings, and nothing but readings."""
    items = received(lab, content).items
    assert all(isinstance(one, Reading) for one in items), items
    return [one for one in items if isinstance(one, Reading)]


def reasons(items: Sequence[object]) -> list[tuple[str, str]]:
    """Why pieces were set aside, and what was found."""
    return [(one.reason, one.found) for one in items if isinstance(one, SetAside)]
