"""A configured MQTT client for whoever needs one: identity, encryption, credentials, delays.

MQTT 5 without a session: every connect starts clean, so nothing is stored on the broker for this client.
"""

from __future__ import annotations

import logging
import os
import sys
from pathlib import Path

from paho.mqtt.client import Client, MQTTv5
from paho.mqtt.enums import CallbackAPIVersion
from paho.mqtt.reasoncodes import ReasonCode

from rtid.errors import InputOutputError, MissingInput
from rtid.settings import Broker, Tls

KEEPALIVE_S = 30
RECONNECT_S = (1, 5)  # first and longest wait; paho's own 120 s keep a node away after the broker is back
UNSPECIFIED, SESSION_TAKEN_OVER = 0x80, 0x8E  # reason codes of MQTT 5.0, section 3.14.2.1
QUEUED_MESSAGES = 1000  # of QoS 1 and 2 while the broker is away; paho's own queue has no bound


def make_client(broker: Broker, client_id: str) -> Client:
    """A client that is not connected yet: set its will and callbacks, then `start()` it.

    An exception in a callback is logged under `rtid.mqtt` and does not end the network thread.
    Raises MissingInput or InputOutputError when a password or certificate file cannot be read.
    """
    client = Client(CallbackAPIVersion.VERSION2, client_id=client_id, protocol=MQTTv5)
    client.enable_logger(logging.getLogger("rtid.mqtt"))
    client.suppress_exceptions = True
    client.reconnect_delay_set(*RECONNECT_S)
    client.max_queued_messages_set(QUEUED_MESSAGES)
    if broker.username is not None:
        client.username_pw_set(broker.username, _password(broker.password_file))
    if broker.tls is not None:
        _encrypt(client, broker.tls)
    return client


def start(client: Client, broker: Broker) -> None:
    """Begin to connect, and go on trying for ever, in the client's own thread. Never blocks."""
    client.connect_async(broker.host, broker.port, keepalive=KEEPALIVE_S, clean_start=True)
    client.loop_start()


def _password(path: str | None) -> str | None:
    if path is None:
        return None
    try:
        return _credential(Path(path)).read_text(encoding="utf-8").rstrip("\r\n")
    except FileNotFoundError:
        raise MissingInput(f"{path}: no such file; put the broker's password there or mend password_file") from None
    except OSError as error:
        raise InputOutputError(f"{path}: the broker's password cannot be read: {error.strerror}") from None
    except UnicodeDecodeError:
        raise InputOutputError(f"{path}: the broker's password is not UTF-8 text; write it anew") from None


def _credential(path: Path) -> Path:
    """The systemd credential of the same name, or else the file itself, which a service need not be able to read."""
    credential = Path(os.environ.get("CREDENTIALS_DIRECTORY", "")) / path.name
    return credential if credential.is_absolute() and credential.is_file() else path


def _encrypt(client: Client, tls: Tls) -> None:
    files = [file for file in (tls.ca_file, tls.cert_file, tls.key_file) if file is not None]
    missing = next((file for file in files if not os.path.exists(file)), None)
    if missing is not None:
        raise MissingInput(f"{missing}: no such file; create it or mend broker.tls")
    try:  # an empty pass phrase: OpenSSL would ask for it on the terminal
        client.tls_set(ca_certs=tls.ca_file, certfile=tls.cert_file, keyfile=tls.key_file, keyfile_password="")
    except (OSError, ValueError) as error:
        names = ", ".join(files)
        raise InputOutputError(f"{names}: not usable for TLS ({error}); PEM files, key without pass phrase") from None


def why_unreachable(broker: Broker) -> str:
    """What kept the client from connecting, in one line. Only of use inside `on_connect_fail`."""
    error = sys.exc_info()[1]  # paho calls back while it handles the error
    text = f"the broker at {broker.address} cannot be reached ({error}); trying again"
    return f"{text}. Is the clock of this computer set?" if "not yet valid" in str(error) else text


def why_refused(broker: Broker, reason: ReasonCode) -> str:
    return f"the broker at {broker.address} refuses the connection: {reason}"


def why_disconnected(broker: Broker, reason: ReasonCode) -> str:
    """Why a connection ended, in one line. Not every broker says that another client took it over: some just close."""
    if reason.value == SESSION_TAKEN_OVER:
        taken = f"another client with the same client id took over the connection to {broker.address}"
        return f"{taken}: give each node its name"
    if reason.value == UNSPECIFIED:
        causes = "the broker stopped, the network failed, or another client has the same client id"
        return f"the connection to the broker at {broker.address} was lost: {causes}"
    return f"the connection to the broker at {broker.address} ended ({reason})"
