from pathlib import Path

import pytest
from history import Truth, cells, history
from survey_calculations import solved_survey

from calcbook.chain.outcome import Solved


@pytest.fixture(scope="session", autouse=True)
def _own_cache(own_cache: None) -> None:
    """Every test of this room works in the cache of the run."""


@pytest.fixture(scope="session")
def solved(tmp_path_factory: pytest.TempPathFactory) -> Solved:
    """The cooler with the survey of a history without errors, to be given other histories."""
    folder: Path = tmp_path_factory.mktemp("cooler")
    return solved_survey(folder, cells(history(Truth(errors={"loss": 0.01}))))
