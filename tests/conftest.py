"""What tests of several rooms share."""

from collections.abc import Iterator

import pytest

from calcbook.properties import clear_memory


@pytest.fixture(scope="session")
def own_cache(tmp_path_factory: pytest.TempPathFactory) -> Iterator[None]:
    """One cache folder for the whole run, so that no test reads or writes the user's."""
    patch = pytest.MonkeyPatch()
    patch.setenv("CALCBOOK_CACHE", str(tmp_path_factory.mktemp("cache")))
    clear_memory()
    yield
    patch.undo()
    clear_memory()
