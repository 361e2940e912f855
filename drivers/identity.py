"""Whether the instrument that answers is the one that its profile means."""

from __future__ import annotations

import re

from drivers.errors import WrongIdentity
from profiles.instrument import Instrument


def accepted(said: str, address: str, profile: Instrument) -> str:
    """What it said it is.

    Raises:
        WrongIdentity: the profile means another; one line with the cure.
    """
    if not re.search(profile.identity, said):
        raise WrongIdentity(
            f"the {profile.role} at {address} says {said!r}; profile {profile.name} wants {profile.identity!r}: "
            "check address and profile"
        )
    return said
