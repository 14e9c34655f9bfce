"""The history file: what is read of it, and what is refused before any row is looked at."""

from __future__ import annotations

from pathlib import Path

import pytest

from calcbook.calcfile.surveyfile import PIECE, History, read_history
from calcbook.faults import Collector, Place

PLACE = Place("trial.yaml", 3, 9, 20, "  file: history.csv")


def read(folder: Path, data: bytes, *heads: str) -> tuple[History | None, list[str]]:
    (folder / "history.csv").write_bytes(data)
    collector = Collector()
    found = read_history(folder / "history.csv", dict.fromkeys(heads or ("t", "T"), PLACE), PLACE, collector)
    return found, [fault.code for fault in collector]


@pytest.mark.parametrize(
    ("data", "code"),
    [
        (b"", "file-empty"),
        (b"\n  \n", "file-empty"),
        (b"t,T\n1,\xff\n", "file-not-utf8"),
        (b"t,T\n1,\x002\n", "file-not-text"),
        (b't,T\n1,"2\n3,4\n', "file-not-text"),
        (b"t,U\n1,2\n", "column-unknown"),
        (b"t,T,T\n1,2,3\n", "key-twice"),
        (b"t;T\n1;2\n", "file-not-text"),
    ],
)
def test_a_file_that_is_no_history_is_refused_by_name(tmp_path: Path, data: bytes, code: str) -> None:
    found, codes = read(tmp_path, data)
    assert found is None
    assert set(codes) == {code}


@pytest.mark.parametrize(
    "data",
    [
        b"t,T\n1,2\n3,4\n",
        b"\xef\xbb\xbft,T\r\n1,2\r\n3,4\r\n",
        b"t,T\r1,2\r3,4",
        b" t , T \n\n 1 ,2\n , \n3, 4 \n",
        b'"t","T"\n"1","2"\n3,4\n',
        b'T,remark,t\n2,"a, b",1\n4,c,3\n',
    ],
)
def test_the_way_it_is_typed_moves_nothing(tmp_path: Path, data: bytes) -> None:
    found, codes = read(tmp_path, data)
    assert codes == [] and found is not None
    assert found.rows == 2
    assert found.columns == {"t": "1\n3", "T": "2\n4"}
    plain, _ = read(tmp_path, b"t,T\n1,2\n3,4\n")
    assert plain is not None and found.content() == plain.content()


def test_a_row_of_another_length_is_a_row_without_figures(tmp_path: Path) -> None:
    found, _ = read(tmp_path, b"t,T\n1,2\n3\n5,6,7\n8,9\n")
    assert found is not None
    assert (found.rows, found.columns["T"]) == (4, "2\n\n\n9")


def test_the_content_tells_one_cell_from_another(tmp_path: Path) -> None:
    one, other = (read(tmp_path, f"t,T\n1,{cell}\n".encode())[0] for cell in ("2", "2.0"))
    assert one is not None and other is not None
    assert one.content()["column t"] == other.content()["column t"]
    assert one.content()["column T"] != other.content()["column T"]


def test_a_long_history_is_read_piece_by_piece(tmp_path: Path) -> None:
    rows = "".join(f'{number},"x, y",{number / 8}\n' for number in range(PIECE + 7))
    found, codes = read(tmp_path, f"t,remark,T\n{rows}".encode())
    assert codes == [] and found is not None
    assert found.rows == PIECE + 7
    assert found.columns["T"].split("\n")[-1] == f"{(PIECE + 6) / 8}"
