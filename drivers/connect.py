"""From an address in a bench profile to a link."""

from __future__ import annotations

from drivers.link import Link
from drivers.serial_link import SerialLink
from drivers.tcp_link import TcpLink
from drivers.visa_link import VisaLink
from profiles.bench import Attached
from profiles.instrument import Instrument


def link_to(attached: Attached, profile: Instrument) -> Link:
    """The link that the scheme of the address asks for; not yet open."""
    scheme = attached.address.split("://", 1)[0]
    if scheme == "tcp":
        return TcpLink(attached.address, profile.timeout_s, profile.terminator)
    if scheme == "serial":
        return SerialLink(attached.address, profile.timeout_s, profile.terminator, attached.baud_rate)
    return VisaLink(attached.address, profile.timeout_s, profile.terminator)
