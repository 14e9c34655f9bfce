from pathlib import Path

import pytest
from history import Truth, cells, history
from survey_calculations import solved_survey

from calcbook.chain.outcome import Solved
from calcbook.properties import clear_memory


@pytest.fixture(scope="session", autouse=True)
def _own_cache(tmp_path_factory: pytest.TempPathFactory):
    """One cache folder for the whole run, so that no test reads or writes the user's."""
    patch = pytest.MonkeyPatch()
    patch.setenv("CALCBOOK_CACHE", str(tmp_path_factory.mktemp("cache")))
    clear_memory()
    yield
    patch.undo()
    clear_memory()


@pytest.fixture(scope="session")
def solved(tmp_path_factory: pytest.TempPathFactory) -> Solved:
    """The cooler with the survey of a history without errors, to be given other histories."""
    folder: Path = tmp_path_factory.mktemp("cooler")
    return solved_survey(folder, cells(history(Truth(errors={"loss": 0.01}))))
