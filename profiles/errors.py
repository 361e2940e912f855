"""Errors of the profiles.

ProfileError           what is wrong with one or more profiles, one problem a line
└── ProfileNotFound    no file of that name
"""

from __future__ import annotations

from collections.abc import Sequence


class ProfileError(Exception):
    """All that is wrong, a line each: file, key, what was given, what is allowed."""

    def __init__(self, problems: Sequence[str]) -> None:
        super().__init__("\n".join(problems))
        self.problems = tuple(problems)


class ProfileNotFound(ProfileError):
    """No profile of that name in the user's folder or among the shipped ones."""
