from __future__ import annotations

import ssl
from pathlib import Path

import pytest
from paho.mqtt.packettypes import PacketTypes
from paho.mqtt.reasoncodes import ReasonCode

from rtid.errors import InputOutputError, MissingInput
from rtid.mqtt_client import make_client, why_disconnected, why_unreachable
from rtid.settings import Broker, Tls


def password_of(broker: Broker) -> bytes | None:
    return make_client(broker, "rtid-test")._password


def test_password_comes_from_its_file_without_the_line_end(tmp_path: Path) -> None:
    secret = tmp_path / "broker.secret"
    secret.write_text("s e c\n")
    assert password_of(Broker(username="rtid", password_file=str(secret))) == b"s e c"


def test_missing_password_file_is_looked_for_among_the_credentials(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    broker = Broker(username="rtid", password_file="/nowhere/broker.secret")
    with pytest.raises(MissingInput, match=r"/nowhere/broker\.secret: no such file"):
        make_client(broker, "rtid-test")
    monkeypatch.setenv("CREDENTIALS_DIRECTORY", str(tmp_path))
    with pytest.raises(MissingInput, match=r"/nowhere/broker\.secret"):
        make_client(broker, "rtid-test")
    (tmp_path / "broker.secret").write_text("from systemd")
    assert password_of(broker) == b"from systemd"


def test_a_credential_goes_before_a_file_that_only_root_may_read(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "etc").mkdir()
    (tmp_path / "etc" / "broker.secret").mkdir()  # reading it fails for root too
    (tmp_path / "broker.secret").write_text("from systemd")
    monkeypatch.setenv("CREDENTIALS_DIRECTORY", str(tmp_path))
    assert (
        password_of(Broker(username="rtid", password_file=str(tmp_path / "etc" / "broker.secret"))) == b"from systemd"
    )


def test_unreadable_password_file_is_one_line_that_names_it(tmp_path: Path) -> None:
    (tmp_path / "binary").write_bytes(b"\xff\xfe")
    for path in (tmp_path, tmp_path / "binary"):
        with pytest.raises(InputOutputError) as caught:
            make_client(Broker(username="rtid", password_file=str(path)), "rtid-test")
        assert str(caught.value).startswith(f"{path}: ")
        assert "\n" not in str(caught.value)


def test_tls_files_are_checked_at_once(tmp_path: Path) -> None:
    with pytest.raises(MissingInput, match=r"/nowhere/ca\.pem"):
        make_client(Broker(tls=Tls(ca_file="/nowhere/ca.pem")), "rtid-test")
    (tmp_path / "ca.pem").write_text("no certificate")
    with pytest.raises(InputOutputError, match="not usable for TLS"):
        make_client(Broker(tls=Tls(ca_file=str(tmp_path / "ca.pem"))), "rtid-test")


def test_system_certificates_serve_where_no_file_is_named() -> None:
    context = make_client(Broker(tls=Tls()), "rtid-test")._ssl_context
    assert context is not None
    assert context.verify_mode is ssl.CERT_REQUIRED
    assert context.check_hostname


def test_an_unset_clock_is_suspected_when_a_certificate_is_not_yet_valid() -> None:
    try:
        raise ssl.SSLCertVerificationError("certificate verify failed: certificate is not yet valid")
    except ssl.SSLError:
        text = why_unreachable(Broker(host="plant", port=8883))
    assert "plant:8883 cannot be reached" in text
    assert "clock" in text


@pytest.mark.parametrize(
    ("code", "words"),
    [(0x8E, "took over"), (0x80, "or another client has the same client id"), (0x8B, "ended (Server shutting down)")],
)
def test_end_of_a_connection_is_told(code: int, words: str) -> None:
    assert words in why_disconnected(Broker(), ReasonCode(PacketTypes.DISCONNECT, identifier=code))
