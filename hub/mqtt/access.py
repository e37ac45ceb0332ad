"""How the hub reaches a broker."""

from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True)
class Access:
    """Where a broker is and who the hub is there.

    Attributes
    ----------
    host, port
        Its address.
    client_id
        The name of the hub's session there.
    username, password
        The hub's login; an empty name logs in without one.
    tls, ca_file
        Whether to speak TLS, and the file of trusted authorities (empty: the system's).
    """

    host: str
    port: int
    client_id: str
    username: str = ""
    password: str = field(default="", repr=False)
    tls: bool = False
    ca_file: str = ""

    @property
    def place(self) -> str:
        """The address as people write it."""
        return f"{self.host}, port {self.port}"
