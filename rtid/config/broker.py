"""The `broker` section: which MQTT broker is joined, and with which credentials."""

from __future__ import annotations

from rtid.config.entry import Entry, Kind, record
from rtid.config.topics import TOPIC
from rtid.config.values import TEXT, integer
from rtid.settings import Broker, Tls

PORT = integer(least=1, most=65535)


def _prefix(entry: Entry) -> str:
    prefix = TOPIC(entry)
    if "" in prefix.split("/") or prefix.startswith("$"):
        entry.refuse(f"'{prefix}' begins with '$' or has an empty level; expected levels with '/' between them")
    return prefix


def _tls(entry: Entry) -> Tls:
    tls = _TLS(entry)
    if (tls.cert_file is None) != (tls.key_file is None):
        entry.refuse("found one of cert_file and key_file; expected both or neither")
    return tls


_TLS = record("the certificates", Tls, {"ca_file": TEXT, "cert_file": TEXT, "key_file": TEXT})
_BROKER = record(
    "the MQTT broker",
    Broker,
    {
        "host": TEXT,
        "port": PORT,
        "prefix": Kind("the first levels of every topic", _prefix),
        "username": TEXT,
        "password_file": TEXT,
        "tls": Kind("the certificates", _tls),
    },
)


def broker(entry: Entry) -> Broker:
    """The broker. A password without a username would never be sent, so it is refused."""
    found = _BROKER(entry)
    if found.password_file is not None and found.username is None:
        entry.refuse("found password_file without username; expected both, or neither")
    return found
