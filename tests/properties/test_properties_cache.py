"""The kept answers: same bits cold and warm, no backend when warm, and every kind of damage survived."""

import json
import os
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from calcbook.properties import PROPERTIES, backend_version, clear_memory, pure
from calcbook.properties import store as kept

PROGRAM = """
import sys
import numpy as np
import calcbook.properties as properties
assert "CoolProp" not in sys.modules, "importing the room imports the backend"
out = []
def take(fluid, temperatures):
    for name in properties.PROPERTIES:
        out.append(fluid.value(name, temperatures).tobytes().hex())
        out.append(fluid.slope(name, temperatures).tobytes().hex())
        out.append(fluid.pressure_slope(name, temperatures).tobytes().hex())
    out.append(repr(fluid.check_state(float(temperatures[0]))))
    out.append(repr((fluid.limits(), fluid.freezing_temperature(), fluid.saturation_temperature())))
    out.append(fluid.fluid.provider)
take(properties.pure("water").at(4e5, "liquid"), np.array([280.0, 300.0, 410.0, 430.0]))
take(properties.pure("water").at(4e5), np.array([280.0, 450.0]))
take(properties.pure("air").at(101325.0), np.array([250.0, 300.0, 800.0]))
take(properties.pure("CarbonDioxide").at(7.5e6), np.array([304.8, 305.0, 305.3, 320.0]))
take(properties.pure("steam").at(None, "vapour"), np.array([300.0, 500.0, 646.7]))
take(properties.mixture("ethylene glycol + water", "mass fraction", 0.4).at(None), np.array([260.0, 330.0]))
print("CoolProp" in sys.modules)
print(chr(10).join(out))
"""


def _run(cache):
    environment = dict(os.environ, CALCBOOK_CACHE=str(cache))
    done = subprocess.run(
        [sys.executable, "-c", PROGRAM], env=environment, capture_output=True, text=True, check=True
    )
    imported, _, answers = done.stdout.partition("\n")
    return imported, answers


def test_warm_repeats_cold_without_the_backend(tmp_path):
    cold_imported, cold = _run(tmp_path)
    warm_imported, warm = _run(tmp_path)
    assert (cold_imported, warm_imported) == ("True", "False")
    assert warm == cold
    assert len(cold) > 1000


def test_bits_do_not_depend_on_the_order_of_asking(empty_cache, tmp_path_factory, monkeypatch):
    at = np.array([304.3, 304.9, 305.2, 310.0, 400.0, 1200.0])
    fluid = pure("CarbonDioxide")
    forward = {name: fluid.at(7.5e6).value(name, at) for name in PROPERTIES}
    monkeypatch.setenv("CALCBOOK_CACHE", str(tmp_path_factory.mktemp("other")))
    clear_memory()
    for name in reversed(PROPERTIES):
        for index in reversed(range(at.size)):
            assert fluid.at(7.5e6).value(name, at[index]) == forward[name][index]


def _files(cache):
    return sorted((cache / "properties").glob("*.json"))


def _answers():
    water = pure("water").at(4e5, "liquid")
    at = np.array([280.0, 333.0, 400.0])
    return [water.value(name, at).tobytes() for name in PROPERTIES]


def _truncate(path):
    path.write_bytes(path.read_bytes()[:-40])


def _flip(path):
    content = bytearray(path.read_bytes())
    place = content.rindex(b".") + 1
    content[place] = ord("9") if content[place] != ord("9") else ord("8")
    path.write_bytes(bytes(content))


def _empty(path):
    path.write_bytes(b"")


def _binary(path):
    path.write_bytes(bytes(range(256)) * 7)


def _foreign(path):
    """A sound file, of another fluid."""
    for other in _files(path.parent.parent):
        if other != path:
            path.write_bytes(other.read_bytes())
            return


def _stale(path):
    """A sound file of an older format."""
    content = path.read_bytes()
    path.write_bytes(b"calcbook-properties-0" + content[content.index(b" ") :])


def _made_otherwise(path):
    """A sound file that other code made: other nodes, say, or another agreement."""
    kind, mark, rest = path.read_bytes().split(b" ", 2)
    path.write_bytes(b" ".join((kind, mark[::-1], rest)))


def _other_version(path):
    """A sound file of another backend version under the name of this one."""
    text = path.read_bytes().partition(b"\n")[2].replace(backend_version().encode(), b"6.0.0")
    path.write_bytes(kept._header(text) + b"\n" + text)


@pytest.mark.parametrize(
    "harm", [_truncate, _flip, _empty, _binary, _foreign, _stale, _made_otherwise, _other_version]
)
def test_a_harmed_file_is_not_used_and_is_made_anew(empty_cache, harm):
    first = _answers()
    sound = {path: path.read_bytes() for path in _files(empty_cache)}
    assert len(sound) == 3  # facts of the fluid, facts at the pressure, the liquid's curve
    for path in sound:
        harm(path)
        assert path.read_bytes() != sound[path]
        clear_memory()
        assert _answers() == first
        assert path.read_bytes() == sound[path]


def test_a_folder_that_cannot_be_written_costs_no_answer(empty_cache, monkeypatch):
    first = _answers()
    blocked = empty_cache / "a file, not a folder"
    blocked.write_text("")
    monkeypatch.setenv("CALCBOOK_CACHE", str(blocked))
    clear_memory()
    assert _answers() == first


def test_no_part_of_a_file_is_left_when_the_move_fails(empty_cache, monkeypatch):
    def refuse(*_):
        raise PermissionError("no")

    monkeypatch.setattr(kept.os, "replace", refuse)
    _answers()
    assert list((empty_cache / "properties").iterdir()) == []


def test_two_processes_add_to_one_file(empty_cache):
    mine, yours = kept.Store("key"), kept.Store("key")
    mine.direct["density"] = {(300.0).hex(): 1.0}
    mine.changed()
    mine.save()
    yours.direct["density"] = {(310.0).hex(): 2.0}
    yours.series["density"] = {"": [1.0, 0.1 + 0.2], "0": None}
    yours.changed()
    yours.save()
    joined = kept.Store("key")
    assert joined.direct == {"density": {(300.0).hex(): 1.0, (310.0).hex(): 2.0}}
    assert joined.series == {"density": {"": [1.0, 0.30000000000000004], "0": None}}


def test_files_name_backend_version_pressure_and_phase(empty_cache):
    _answers()
    keys = [json.loads(path.read_bytes().partition(b"\n")[2])["key"] for path in _files(empty_cache)]
    assert f"HEOS Water {backend_version()} {(4e5).hex()} liquid" in keys


def test_another_backend_version_asks_anew_and_leaves_the_old_files(empty_cache, monkeypatch):
    from calcbook.properties import backend

    _answers()
    old = {path: path.read_bytes() for path in _files(empty_cache)}
    # Coefficients of the old version that must not be taken for those of the new one.
    monkeypatch.setattr(backend, "backend_version", lambda: "99.0")
    asked = []
    at_pressure = backend.at_pressure
    monkeypatch.setattr(backend, "at_pressure", lambda *place: asked.append(place) or at_pressure(*place))
    clear_memory()
    _answers()
    assert len(asked) > 20
    new = set(_files(empty_cache)) - set(old)
    assert len(new) == len(old)
    assert all("99.0" in json.loads(path.read_bytes().partition(b"\n")[2])["key"] for path in new)
    assert {path: path.read_bytes() for path in old} == old


def test_every_file_that_makes_answers_is_in_the_mark():
    folder = Path(kept.__file__).parent
    makers = {
        path.name
        for path in folder.glob("*.py")
        if re.search(
            r"\b(Curve|Family|store)\(|state\.update|def (fit|nodes)\b", path.read_text(encoding="utf-8")
        )
    }
    assert makers - {"store.py"} <= set(kept.MAKERS)
    assert kept.made_by() != "" and all((folder / name).is_file() for name in kept.MAKERS)


def test_the_user_folder_is_used_where_none_is_stated(monkeypatch):
    monkeypatch.delenv("CALCBOOK_CACHE")
    assert kept.folder().name == "properties"
    assert "calcbook" in kept.folder().parts
