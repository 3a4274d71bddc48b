"""Rules that hold for the whole package: imports one way, foreign libraries behind one door, docstrings, plain words.

Outside reference: none; these are the project's own rules, read from its source text by Python's ast.
"""

import ast
import re
import sys
import tomllib
from functools import cache
from pathlib import Path

import pytest

import transim

PACKAGE = Path(transim.__file__).parent
ROOT = PACKAGE.parent
MODULES = {path.relative_to(ROOT).with_suffix("").as_posix().replace("/", "."): path for path in PACKAGE.rglob("*.py")}

#: A room imports from itself and from rooms before it.
ROOMS = (
    ("errors",), ("quantities",), ("engine", "parts", "measure"), ("design",), ("circuit",), ("envelope",), ("study",),
    ("bench",), ("report",), ("commands",), ("cli",), ("__main__",),
)  # fmt: skip
RANK = {room: rank for rank, rooms in enumerate(ROOMS) for room in rooms}
#: Rooms that know less than their place allows.
ONLY = {"measure": {"errors", "quantities"}, "engine": {"errors"}}

#: Foreign library, and the modules or rooms (ending with a dot) that may import it.
DOORS = {
    "PySpice": ("transim.circuit.assemble",),
    "subprocess": ("transim.engine.ngspice",),
    "multiprocessing": ("transim.study.",),
    "click": ("transim.cli", "transim.commands."),
    "rich": ("transim.cli", "transim.commands."),
    "matplotlib": ("transim.report.",),
    "pydantic": ("transim.design.",),
}
#: scipy costs up to a second to import: nowhere at module level.
LATE = ("scipy", "matplotlib")

#: What a text of the project does not speak of: how it is made, where it lies, who asked.
WORDS = (
    r"(?<!scope=\")\bsessions?\b", r"\bissue tracker\b", r"\bpull request\b", r"\bcontinuous integration\b",
    r"\bTODO\b", r"\bFIXME\b", r"\bXXX\b", r"\bthe (user|lead|brief) (asked|said|wants)\b", r"\bprompts?\b", r"\bassistant\b",
    r"\blanguage model\b", r"(?<![\w.])/(home|work|root|Users)/", r"\bgithub\.com\b", r"\bpypi\.org\b",
)  # fmt: skip


@cache
def parsed(path):
    return ast.parse(path.read_text(encoding="utf-8"))


@cache
def imports(path):
    """Return (module, line, whether at module level) of every import."""
    found = []

    def visit(node, top):
        if isinstance(node, ast.Import):
            found.extend((name.name, node.lineno, top) for name in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}:{node.lineno}: relative import"
            for name in node.names:
                whole = f"{node.module}.{name.name}"
                found.append((whole if whole in MODULES else node.module, node.lineno, top))
        for child in ast.iter_child_nodes(node):
            visit(child, top and not isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef))

    visit(parsed(path), True)
    return tuple(found)


def room(module):
    parts = module.split(".")
    return parts[1] if len(parts) > 1 else "__init__"


def test_every_room_is_known():
    assert {room(module) for module in MODULES} - {"__init__"} <= set(RANK)


@pytest.mark.parametrize("module", sorted(MODULES))
def test_imports_go_one_way(module):
    own = room(module)
    for name, line, _ in imports(MODULES[module]):
        if name.split(".")[0] != "transim" or name == "transim":
            continue
        other = room(name)
        allowed = other == own or RANK[other] < RANK[own]
        if own in ONLY and other != own:
            allowed = other in ONLY[own]
        assert allowed, f"{MODULES[module]}:{line}: {own} imports {other}"


def test_the_root_imports_nothing_of_its_own():
    assert [name for name, *_ in imports(MODULES["transim.__init__"]) if name.startswith("transim")] == []


def test_no_module_imports_itself_in_a_circle():
    graph = {
        module: {name for name, _, top in imports(path) if top and name in MODULES} for module, path in MODULES.items()
    }
    waiting = dict(graph)
    while waiting:
        free = [module for module, needs in waiting.items() if not needs & set(waiting)]
        assert free, f"a circle among {sorted(waiting)}"
        for module in free:
            del waiting[module]


@pytest.mark.parametrize("library", DOORS)
def test_foreign_libraries_have_one_door(library):
    for module, path in MODULES.items():
        for name, line, _ in imports(path):
            if name.split(".")[0] == library:
                doors = DOORS[library]
                assert any(module == door or (door.endswith(".") and module.startswith(door)) for door in doors), (
                    f"{path}:{line}: {library} belongs to {', '.join(doors)}"
                )


def test_one_module_imports_pyspice_and_one_starts_processes():
    for library in ("PySpice", "subprocess"):
        importing = {module for module, path in MODULES.items() if any(holds(name, library) for name, *_ in imports(path))}
        assert importing == set(DOORS[library])


def holds(name, library):
    return name.split(".")[0] == library


def test_no_process_is_started_another_way():
    starting = re.compile(r"\bos\.(system|popen|exec\w*|spawn\w*|fork|posix_spawn)\(")
    for path in MODULES.values():
        assert not starting.search(path.read_text(encoding="utf-8")), path


@pytest.mark.parametrize("library", LATE)
def test_slow_libraries_are_imported_where_they_are_needed(library):
    for path in MODULES.values():
        for name, line, top in imports(path):
            if name.split(".")[0] == library and "report" not in path.parts:
                assert not top, f"{path}:{line}: import {library} inside the function that needs it"


def test_every_import_is_a_declared_dependency():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    texts = [*project["dependencies"], *(text for extra in project["optional-dependencies"].values() for text in extra)]
    declared = {re.match(r"[\w-]+", text)[0].lower() for text in texts}
    for path in MODULES.values():
        for name, line, _ in imports(path):
            top = name.split(".")[0]
            if top not in sys.stdlib_module_names and top != "transim":
                # pydantic's own core, which it pins
                top = top.removesuffix("_core")
                assert top.lower() in declared, f"{path}:{line}: {top} is not in pyproject.toml"


def public(tree):
    """Yield (name, node) of the module, its public classes and functions, and their public methods."""
    yield "module", tree
    for node in tree.body:
        if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
            yield node.name, node
            if isinstance(node, ast.ClassDef):
                for inner in node.body:
                    if isinstance(inner, ast.FunctionDef) and not inner.name.startswith("_"):
                        yield f"{node.name}.{inner.name}", inner


@pytest.mark.parametrize("module", sorted(MODULES))
def test_everything_public_has_a_docstring(module):
    path = MODULES[module]
    for name, node in public(parsed(path)):
        text = ast.get_docstring(node)
        assert text, f"{path}: {name} has no docstring"
        first = text.splitlines()[0]
        assert first.endswith((".", ":", ";")), f"{path}: the docstring of {name} begins with no sentence"


def test_names_say_what_things_are():
    vague = re.compile(r"(^|_)(utils?|helpers?|managers?|handlers?|base|common|misc)(_|$)")
    vague_class = re.compile(r"(Util|Helper|Manager|Handler|Base|Common|Misc)s?$|^Test")
    for module, path in MODULES.items():
        assert not any(vague.search(part) for part in module.split(".")), module
        tree = parsed(path)
        for node in ast.walk(tree):
            if isinstance(node, ast.ClassDef):
                assert not vague_class.search(node.name), f"{path}: {node.name}"


def texts():
    yield from MODULES.values()
    for folder, pattern in (("netlists", "*.cir"), ("examples", "*.toml"), ("tests", "*.py")):
        yield from (ROOT / folder).rglob(pattern)
    yield from ROOT.glob("*.md")


def test_texts_speak_of_the_project_alone():
    for path in texts():
        if path == Path(__file__):
            continue
        for number, line in enumerate(path.read_text(encoding="utf-8").splitlines(), 1):
            for word in WORDS:
                assert not re.search(word, line), f"{path}:{number}: {line.strip()!r} holds {word}"


def test_exported_names_exist():
    for module, path in MODULES.items():
        tree = parsed(path)
        listed = [
            ast.literal_eval(node.value)
            for node in tree.body
            if isinstance(node, ast.Assign) and names_of(node) == ["__all__"]
        ]
        if not listed:
            assert module.endswith(("__init__", "__main__")), f"{path} has no __all__"
            continue
        bound = {name for node in ast.walk(tree) for name in names_of(node)}
        assert set(listed[0]) <= bound, f"{path}: {sorted(set(listed[0]) - bound)}"


def names_of(node):
    if isinstance(node, ast.FunctionDef | ast.ClassDef):
        return [node.name]
    if isinstance(node, ast.Assign):
        flat = [name for target in node.targets for name in ast.walk(target)]
        return [name.id for name in flat if isinstance(name, ast.Name)]
    if isinstance(node, ast.AnnAssign) and isinstance(node.target, ast.Name):
        return [node.target.id]
    if isinstance(node, ast.ImportFrom):
        return [name.asname or name.name for name in node.names]
    return []
