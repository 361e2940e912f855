"""For all tests: nobody's own profiles are seen, and invariants are tried without a clock."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from hypothesis import HealthCheck, settings

from profiles.load import FOLDER_VARIABLE

# the machine may be shared, so how long an example takes says nothing; and nothing is written beside the tests
settings.register_profile(
    "truepivot", deadline=None, database=None, print_blob=True, suppress_health_check=[HealthCheck.too_slow]
)
settings.load_profile("truepivot")


@pytest.fixture(scope="session", autouse=True)
def nobodys_profiles(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """An empty folder in place of the profiles of whoever runs the tests."""
    with pytest.MonkeyPatch.context() as patch:
        patch.setenv(FOLDER_VARIABLE, str(tmp_path_factory.mktemp("nobodys-profiles")))
        yield
