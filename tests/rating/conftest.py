import pytest

from calcbook.properties import clear_memory


@pytest.fixture(scope="session", autouse=True)
def _own_cache(tmp_path_factory):
    """One cache folder for the whole run, so that no test reads or writes the user's."""
    patch = pytest.MonkeyPatch()
    patch.setenv("CALCBOOK_CACHE", str(tmp_path_factory.mktemp("cache")))
    clear_memory()
    yield
    patch.undo()
    clear_memory()
