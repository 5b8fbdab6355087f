"""Connections secured by TLS, in which both sides show a certificate."""

import ssl
from pathlib import Path

from pbm.errors import InputError, one_line
from pbm.records.feed import FeedSettings


def server_context(settings: FeedSettings, folder: Path) -> ssl.SSLContext:
    """What a server secures its connections with; it admits only senders whose certificate is vouched for.

    Parameters
    ----------
    settings
        The names of the files.
    folder
        That of `lab.toml`, where files without a folder lie.

    Raises
    ------
    InputError
        If a file is not named, cannot be read, or does not fit the others.
    """
    if settings.certificate is None or settings.key is None or settings.clients is None:
        raise InputError(
            "mllps:// needs certificate, key and clients under [feed] in lab.toml: the certificate of this receiver, its key, and the "
            "authorities that vouch for the senders' certificates."
        )
    context = ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER)
    context.minimum_version = ssl.TLSVersion.TLSv1_2
    context.verify_mode = ssl.CERT_REQUIRED
    certificate, key, clients = (folder / name for name in (settings.certificate, settings.key, settings.clients))
    for path in (certificate, key, clients):
        if not path.is_file():
            raise InputError(
                f"There is no file {path}, which [feed] in lab.toml names. Correct the name, or put it there."
            )
    try:
        context.load_cert_chain(certificate, key, password="")
    except (OSError, ValueError) as error:
        raise InputError(
            f"{certificate} and {key} are no certificate and its key without password in PEM ({one_line(error)})."
        ) from None
    try:
        context.load_verify_locations(clients)
    except (OSError, ValueError) as error:
        raise InputError(f"{clients} holds no certificates in PEM ({one_line(error)}).") from None
    return context
