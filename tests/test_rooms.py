"""The house rules of DEVELOPERS.md, held by reading the code: who may import whom, and who may do what.

Nothing is imported to find out: every file is parsed, so a rule holds for an import inside a function or
under TYPE_CHECKING as well.
"""

from __future__ import annotations

import ast
import re
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parent.parent / "calcbook"

# From the lowest room to the highest: a room imports rooms before it, never after it.
ORDER = (
    "files",
    "fault_codes",
    "faults",
    "files",
    "quantities",
    "documents",
    "seals",
    "formulas",
    "properties",
    "library",
    "calcfile",
    "chain",
    "rating",
    "uncertainty",
    "survey",
    "record",
    "links",
    "interface",
    "revisions",
    "book",
    "commands",
    "__main__",
)
# What the order would allow and the rooms' own promises refuse.
REFUSED = {
    "documents": {"quantities"},
    "formulas": {"fault_codes", "faults", "quantities", "documents"},
    "properties": {"quantities", "documents", "formulas"},
    "library": {"properties"},
    "calcfile": {"properties", "library"},
}
# Packages of others, and the only rooms that know them.
OWNERS = {
    "CoolProp": {"properties"},
    "pint": {"quantities"},
    "yaml": {"documents"},
    "click": {"commands"},
    "rich": {"commands", "book"},
    "platformdirs": {"properties", "book"},
    "markdown_it": {"record"},
    "scipy": {"formulas", "chain", "rating", "uncertainty"},
    "numpy": {
        *(
            "formulas",
            "properties",
            "library",
            "chain",
            "rating",
            "survey",
            "uncertainty",
            "record",
            "revisions",
        ),
    },
}
# A run never asks the machine about itself: same input, same bytes. Sign-off dates are compared with today
# in `revisions`; the cache folder is named by the environment in `properties`.
MACHINE = {
    *("now", "today", "utcnow", "time_ns", "perf_counter", "monotonic"),
    *("gethostname", "getuser", "getlocale", "environ", "getenv"),
}
MACHINE_ALLOWED = {"properties": {"environ", "getenv"}, "revisions": {"today"}}
# The rule beneath a table's head, and the closed end of a row. A bar between two words is a list of choices,
# and one at the start of a line may be a drawing.
TABLE_MAKING = re.compile(r"\|\s*:?-{3,}|-{3,}:?\s*\|| \|$")
MARKDOWN_MAKER = "record/markdown.py"


@dataclass(frozen=True)
class Source:
    """One file of the package, parsed."""

    name: str
    room: str
    tree: ast.Module


@dataclass(frozen=True)
class Import:
    """One import: the file and line that has it, the room it stands in, the dotted name it asks for."""

    where: str
    room: str
    module: str


def _sources() -> list[Source]:
    found = []
    for path in sorted(PACKAGE.rglob("*.py")):
        relative = path.relative_to(PACKAGE)
        tree = ast.parse(path.read_text(encoding="utf-8"), str(relative))
        found.append(Source(relative.as_posix(), relative.parts[0].removesuffix(".py"), tree))
    return found


SOURCES = _sources()


def _modules(node: ast.AST) -> Iterator[str]:
    if isinstance(node, ast.Import):
        yield from (alias.name for alias in node.names)
    elif isinstance(node, ast.ImportFrom):
        assert node.level == 0, "imports are written from the root: `from calcbook.room import …`"
        assert node.module is not None
        if node.module == "calcbook":
            yield from (f"calcbook.{alias.name}" for alias in node.names)
        else:
            yield node.module


def _imports() -> Iterator[Import]:
    for source in SOURCES:
        for node in ast.walk(source.tree):
            for module in _modules(node):
                yield Import(f"{source.name}:{getattr(node, 'lineno', 0)}", source.room, module)


IMPORTS = list(_imports())


def _own(module: str) -> str | None:
    """The room that an import of calcbook leads to, or None for a package of others."""
    parts = module.split(".")
    return parts[1] if parts[0] == "calcbook" and len(parts) > 1 else None


def _texts(tree: ast.Module) -> Iterator[ast.Constant]:
    """The texts that a file makes: its string constants without its docstrings."""
    documentation = {node.value for node in ast.walk(tree) if isinstance(node, ast.Expr)}
    for node in ast.walk(tree):
        if isinstance(node, ast.Constant) and isinstance(node.value, str) and node not in documentation:
            yield node


def test_every_file_stands_in_a_room_of_the_order() -> None:
    rooms = {source.room for source in SOURCES} - {"__init__"}
    assert rooms <= set(ORDER), f"rooms that the order does not know: {sorted(rooms - set(ORDER))}"
    assert {"quantities", "formulas", "properties", "library", "calcfile", "chain"} <= rooms


def test_a_room_imports_only_rooms_below_it() -> None:
    wrong = []
    for found in IMPORTS:
        target = _own(found.module)
        if target is None or target == found.room or found.room == "__init__":
            continue
        if target not in ORDER or ORDER.index(target) >= ORDER.index(found.room):
            wrong.append(f"{found.where} imports {found.module}")
        elif target in REFUSED.get(found.room, ()):
            wrong.append(f"{found.where} imports {found.module}, which its room promises not to")
    assert wrong == []


def test_the_package_itself_knows_only_its_interface() -> None:
    targets = {_own(found.module) for found in IMPORTS if found.room == "__init__"} - {None}
    assert targets == {"interface"}


def test_a_package_of_others_is_known_to_its_owners_only() -> None:
    wrong = []
    for found in IMPORTS:
        top = found.module.split(".")[0]
        standard = top in sys.stdlib_module_names or top == "calcbook"
        if not standard and found.room not in OWNERS.get(top, ()):
            wrong.append(f"{found.where} imports {found.module}")
    assert wrong == []


def _called(node: ast.AST) -> str:
    """The bare name that is called, without what stands before its last point."""
    if not isinstance(node, ast.Call):
        return ""
    if isinstance(node.func, ast.Name):
        return node.func.id
    return node.func.attr if isinstance(node.func, ast.Attribute) else ""


def test_no_text_is_run_as_code_and_nothing_is_imported_by_a_made_name() -> None:
    # Only `commands` loads its own files by name, so that one command does not pay for the others.
    wrong = [
        f"{source.name}:{getattr(node, 'lineno', 0)} {_called(node)}"
        for source in SOURCES
        for node in ast.walk(source.tree)
        if _called(node) in ("import_module", "__import__", "eval", "exec")
        and (source.room, _called(node)) != ("commands", "import_module")
    ]
    assert wrong == []


def test_only_commands_print() -> None:
    wrong = [
        f"{source.name}:{node.lineno}"
        for source in SOURCES
        if source.room != "commands"
        for node in ast.walk(source.tree)
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "print"
    ]
    assert wrong == []


def test_no_room_asks_the_clock_the_host_or_the_locale() -> None:
    wrong = [
        f"{source.name}:{getattr(node, 'lineno', 0)} {asked}"
        for source in SOURCES
        for node in ast.walk(source.tree)
        # A call, as `was` and `now` are also the two sides of a change; the environment is no call.
        if (asked := _called(node) or getattr(node, "attr", "")) in MACHINE
        and (isinstance(node, ast.Call) or asked == "environ")
        and asked not in MACHINE_ALLOWED.get(source.room, ())
    ]
    assert wrong == []


def test_only_one_file_makes_markdown_tables() -> None:
    wrong = [
        f"{source.name}:{text.lineno} {text.value!r}"
        for source in SOURCES
        if source.name != MARKDOWN_MAKER
        for text in _texts(source.tree)
        if TABLE_MAKING.search(str(text.value))
    ]
    assert wrong == []


@pytest.mark.parametrize("text", ["|---|", "| --- |", "|:---|", "| a |", "b |"])
def test_table_making_is_recognised(text: str) -> None:
    assert TABLE_MAKING.search(text)


@pytest.mark.parametrize("text", ["SI | US customary", " | ", "| R_1", "a --- b", "yes | no", "2026-11-20"])
def test_a_list_of_choices_is_no_table(text: str) -> None:
    assert not TABLE_MAKING.search(text)


ROOMS_THAT_ARE_FOLDERS = sorted({path.parent.name for path in PACKAGE.glob("*/*.py")})


@pytest.mark.parametrize("room", ROOMS_THAT_ARE_FOLDERS)
def test_a_room_says_what_it_may_import_and_what_it_must_never_do(room: str) -> None:
    front = PACKAGE / room / "__init__.py"
    assert front.is_file(), f"{room} has no __init__.py"
    words = ast.get_docstring(ast.parse(front.read_text(encoding="utf-8"))) or ""
    assert re.search(r"\bMay\s+import\b", words), f"{room} does not say what it may import"
    assert re.search(r"\bMust\s+never\b", words), f"{room} does not say what it must never do"


def test_importing_calcbook_loads_no_package_of_others() -> None:
    heavy = sorted({*OWNERS, "calcbook.interface"})
    program = f"import sys, calcbook; print([name for name in {heavy!r} if name in sys.modules])"
    finished = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True, cwd=PACKAGE.parent
    )
    assert finished.stdout.strip() == "[]"
