"""How `pbm watch` receives and reads live feeds, HL7 messages above all, as the laboratory says in `[feed]` of `lab.toml`."""

import codecs
from ipaddress import ip_network
from typing import Annotated

from pydantic import AfterValidator, Field, model_validator

from pbm.records.quantities import Positive, Written


def known_encoding(name: str) -> str:
    """An encoding of text that is known.

    Raises
    ------
    ValueError
        If it is not.
    """
    try:
        known = isinstance(codecs.getincrementaldecoder(name)().decode(b""), str)
    except (LookupError, TypeError, ValueError):
        known = False
    if not known:
        raise ValueError('expected an encoding of text such as "utf-8", "utf-16" or "latin-1"')
    return name


def _network(text: str) -> str:
    try:
        ip_network(text)
    except ValueError:
        raise ValueError('expected an address such as "10.1.2.3" or a network such as "10.1.2.0/24"') from None
    return text


class FeedSettings(Written):
    """How HL7 messages are received (`pbm watch --from mllp://HOST:PORT`) and read.

    Attributes
    ----------
    peers
        Addresses and networks that may send; needed unless only this computer can reach the port, or senders show certificates.
    certificate, key
        Files (PEM) by which `mllps://` proves who it is; beside `lab.toml` if no folder is given.
    clients
        File (PEM) of the authorities that vouch for the senders' certificates; needed with `mllps://`.
    encoding
        Of messages that are neither as MSH-18 declares nor UTF-8.
    analyser_level
        Which repetition of OBX-18 names the analyser: 1 the first, which is the lowest level, such as a module.
    preliminary
        Take results that are not final yet (OBX-11 P, R, S); the final one then counts no more. With false only final ones are taken.
    largest_message
        Bytes; a longer one is refused.
    connections
        At the same time.
    idle_minutes
        After so long without a byte a connection is closed.
    reorder_seconds
        A result of a live feed of any kind waits for so long, so that results are taken in the order in which they were measured; alarms
        then come so much later. With 0 they are taken as they arrive.
    """

    peers: tuple[Annotated[str, AfterValidator(_network)], ...] = ()
    certificate: str | None = None
    key: str | None = None
    clients: str | None = None
    encoding: Annotated[str, AfterValidator(known_encoding)] = "latin-1"
    analyser_level: int = Field(default=1, ge=1, le=9)
    preliminary: bool = True
    largest_message: int = Field(default=1_000_000, ge=1_000, le=100_000_000)
    connections: int = Field(default=32, ge=1, le=1000)
    idle_minutes: Positive = 60.0
    reorder_seconds: Annotated[float, Field(ge=0, le=600)] = 0.0

    @model_validator(mode="after")
    def _certificates_go_together(self) -> "FeedSettings":
        if len({self.certificate is None, self.key is None, self.clients is None}) > 1:
            raise ValueError("expected certificate, key and clients together")
        return self
