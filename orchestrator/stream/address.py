"""Where the broker is, and whether the night may use it."""

import ipaddress
import ssl
import uuid
from dataclasses import dataclass
from pathlib import Path
from typing import Any


class AddressError(ValueError):
    """The broker may not be used as given; the message says what is missing."""


@dataclass(frozen=True, slots=True)
class BrokerAddress:
    """A broker and how to log on to it.

    A broker anywhere but on the loopback address needs a password and TLS, unless ``why_open``
    says why not (safety promise 9).

    Attributes
    ----------
    host, port : str, int
        Where it listens.
    username, password : str or None
        Credentials; the password never stands in the ledger.
    tls : bool
        Whether the connection is encrypted and the broker's certificate checked.
    ca_file : Path or None
        Certificates to trust in place of the system's.
    why_open : str
        The rig file's reason for doing without password or TLS; empty if there is none.
    """

    host: str = "127.0.0.1"
    port: int = 1883
    username: str | None = None
    password: str | None = None
    tls: bool = False
    ca_file: Path | None = None
    why_open: str = ""

    def __post_init__(self) -> None:
        if not 1 <= self.port <= 65535:
            raise AddressError(f"broker port {self.port} is not between 1 and 65535")
        lacking = [] if self.password else ["a password"]
        lacking += [] if self.tls else ["TLS"]
        if lacking and not self.loopback and not self.why_open.strip():
            raise AddressError(
                f"broker {self.host}:{self.port} is not on the loopback address and has no "
                f"{' and no '.join(text.removeprefix('a ') for text in lacking)}: give "
                f"{' and '.join(lacking)}, or say in the rig file why not"
            )

    @property
    def loopback(self) -> bool:
        """Whether the host is this machine by its loopback address."""
        if self.host == "localhost":
            return True
        try:
            return ipaddress.ip_address(self.host).is_loopback
        except ValueError:
            return False

    def __str__(self) -> str:
        return f"{self.host}:{self.port}"

    def client_options(self) -> dict[str, Any]:
        """Keyword arguments of an `aiomqtt.Client` that reaches this broker, anew each time."""
        context = None
        if self.tls:
            context = ssl.create_default_context(cafile=self.ca_file)
        return {
            # Left to itself the client sends no identity, and the broker invents one.
            "identifier": f"nightfield-{uuid.uuid4().hex[:12]}",
            "hostname": self.host,
            "port": self.port,
            "username": self.username,
            "password": self.password,
            "tls_context": context,
        }
