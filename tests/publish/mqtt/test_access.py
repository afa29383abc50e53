"""Passwords and certificates: found where the bench file says, refused in a sentence, never told."""

import ssl
from dataclasses import replace
from pathlib import Path

import pytest

from hvhost.publish.mqtt.access import password_of, queue_folder, tls_of
from hvhost.words.errors import CannotConnect
from tests.publish.mqtt.scene import BROKER


def test_no_password_where_none_is_named() -> None:
    """A broker that needs none is given none."""
    assert password_of(BROKER, {}) is None


def test_a_password_from_the_environment() -> None:
    """The variable's value; a missing or empty one is a sentence with its name."""
    broker = replace(BROKER, user="u", password_environment="BENCH_SECRET")
    assert password_of(broker, {"BENCH_SECRET": "pa ss"}) == "pa ss"
    for lacking in ({}, {"BENCH_SECRET": ""}):
        with pytest.raises(CannotConnect, match="BENCH_SECRET"):
            password_of(broker, lacking)


def test_a_password_from_a_file(tmp_path: Path) -> None:
    """The first line, without its end; a file open to everybody is refused with the remedy."""
    path = tmp_path / "password"
    broker = replace(BROKER, user="u", password_file=str(path))
    with pytest.raises(CannotConnect, match="No such file"):
        password_of(broker, {})
    path.write_text("pass word\nsecond\n")
    path.chmod(0o640)
    assert password_of(broker, {}) == "pass word"
    path.chmod(0o604)
    with pytest.raises(CannotConnect, match="chmod") as caught:
        password_of(broker, {})
    assert "pass word" not in str(caught.value)
    path.chmod(0o600)
    for bad in (b"", b"\n", b"\xff\n"):
        path.write_bytes(bad)
        with pytest.raises(CannotConnect):
            password_of(broker, {})


def test_tls_verifies_certificate_and_name() -> None:
    """Verification and the check of the name are on, and nothing older than TLS 1.2 is spoken; no TLS, no context."""
    context = tls_of(replace(BROKER, tls=True))
    assert context is not None
    assert context.verify_mode is ssl.CERT_REQUIRED
    assert context.check_hostname
    assert context.minimum_version is ssl.TLSVersion.TLSv1_2
    assert tls_of(BROKER) is None


def test_bad_certificate_files_are_sentences(tmp_path: Path) -> None:
    """Missing or unfit files are told by path."""
    with pytest.raises(CannotConnect, match=r"ca\.pem"):
        tls_of(replace(BROKER, tls=True, ca=str(tmp_path / "ca.pem")))
    (tmp_path / "c.pem").write_text("no certificate")
    with pytest.raises(CannotConnect, match=r"c\.pem"):
        tls_of(replace(BROKER, tls=True, certificate=str(tmp_path / "c.pem"), key=str(tmp_path / "c.pem")))
    with pytest.raises(CannotConnect, match=r"c\.pem"):
        tls_of(replace(BROKER, tls=True, ca=str(tmp_path / "c.pem")))


def test_where_events_wait() -> None:
    """As the bench file says; else the service's state folder; else the user's."""
    assert queue_folder(replace(BROKER, queue_folder="/a/b"), {"HOME": "/h"}) == Path("/a/b")
    assert queue_folder(BROKER, {"STATE_DIRECTORY": "/s:/t", "XDG_STATE_HOME": "/x"}) == Path("/s/hvhost/mqtt/b1")
    assert queue_folder(BROKER, {"XDG_STATE_HOME": "/x"}) == Path("/x/hvhost/mqtt/b1")
    assert queue_folder(BROKER, {"XDG_STATE_HOME": "relative", "HOME": "/h"}) == Path("/h/.local/state/hvhost/mqtt/b1")
