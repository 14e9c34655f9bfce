import pytest


@pytest.fixture(scope="session", autouse=True)
def _own_cache(own_cache: None) -> None:
    """Every test of this room works in the cache of the run."""
