"""What a connection needs beside its address: the password and the TLS context; both are read from disk here.

Called away from the loop.  Neither a password nor a key ever stands in an error's text.
"""

import os
import ssl
import stat
from collections.abc import Mapping
from pathlib import Path

from hvhost.bench.broker import Broker
from hvhost.words.errors import CannotConnect

LONGEST_PASSWORD = 1024  # characters


def password_of(broker: Broker, environment: Mapping[str, str]) -> str | None:
    """The password from its file (first line) or variable; None where the bench file names neither."""
    if broker.password_environment:
        found = environment.get(broker.password_environment, "")
        if not found:
            raise CannotConnect("a password", "an empty or missing variable", f"${broker.password_environment}",
                                "set it in the daemon's environment")
        return found
    if not broker.password_file:
        return None
    path = Path(broker.password_file)
    try:
        mode = path.stat().st_mode
        lines = path.read_text("utf-8")[:LONGEST_PASSWORD].splitlines()
    except (OSError, UnicodeDecodeError) as error:
        raise CannotConnect("a password file", getattr(error, "strerror", "") or "not UTF-8", str(path)) from None
    if mode & (stat.S_IROTH | stat.S_IWOTH):
        raise CannotConnect("a password file that not everybody may read or write", stat.filemode(mode), str(path),
                            f"chmod o-rw {path}")
    if not lines or not lines[0]:
        raise CannotConnect("a password on the first line", "nothing", str(path))
    return lines[0]


class ClosingSocket(ssl.SSLSocket):
    """Closes itself where the handshake fails: the client library forgets such a socket open."""

    def do_handshake(self, block: bool = False) -> None:
        """Shake hands or close."""
        try:
            super().do_handshake(block)
        except OSError:
            self.close()
            raise


def tls_of(broker: Broker) -> ssl.SSLContext | None:
    """A context that verifies the broker's certificate and name, TLS 1.2 or later; None where TLS is not wanted."""
    if not broker.tls:
        return None
    try:
        context = ssl.create_default_context(ssl.Purpose.SERVER_AUTH, cafile=broker.ca or None)
        context.sslsocket_class = ClosingSocket
        context.minimum_version = ssl.TLSVersion.TLSv1_2
    except (OSError, ssl.SSLError) as error:
        raise CannotConnect("certificates of authorities", _short(error), broker.ca or "system") from None
    if broker.certificate:
        try:  # an empty password instead of a question on the daemon's terminal
            context.load_cert_chain(broker.certificate, broker.key, password=lambda: "")
        except (OSError, ssl.SSLError) as error:
            raise CannotConnect("a client certificate and its key", _short(error), broker.certificate,
                                "see that both files are PEM, belong together and that the key has no passphrase"
                                ) from None
    return context


def queue_folder(broker: Broker, environment: Mapping[str, str]) -> Path:
    """Where waiting events lie: as the bench file says, else the service's state folder, else the user's."""
    if broker.queue_folder:
        return Path(broker.queue_folder)
    state = environment.get("STATE_DIRECTORY", "").partition(":")[0] or environment.get("XDG_STATE_HOME", "")
    base = Path(state) if os.path.isabs(state) else Path(environment.get("HOME", "/")) / ".local" / "state"
    return base / "hvhost" / "mqtt" / broker.station


def _short(error: Exception) -> str:
    return (getattr(error, "reason", None) or getattr(error, "strerror", None) or type(error).__name__)[:100]
