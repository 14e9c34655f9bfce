import pytest

from calcbook.properties import clear_memory


@pytest.fixture(scope="session", autouse=True)
def _own_cache(own_cache: None) -> None:
    """Every test of this room works in the cache of the run."""


@pytest.fixture
def empty_cache(tmp_path, monkeypatch):
    """A cache folder of this test's own, empty."""
    monkeypatch.setenv("CALCBOOK_CACHE", str(tmp_path))
    clear_memory()
    yield tmp_path
    clear_memory()
