"""The rules of the house: who may import whom, what is documented, how large a module is, what lies at the top level."""

from __future__ import annotations

import ast
import graphlib
import os
import re as regex
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
HOUSE = ROOT / "synth"

# From the ground up; each room imports only rooms below it. DEVELOPERS.md shows the same list.
ROOMS = (
    "quantities",
    "catalogue",
    "preferred",
    "transistor",
    "parts",
    "stress",
    "reference",
    "networks",
    "q_point",
    "signal",
    "measures",
    "box",
    "straddle",
    "limits",
    "rss",
    "statistics",
    "faults",
    "stage",
    "answer",
    "choices",
    "spaces",
    "search",
    "ranking",
    "explain",
    "facts",
    "tradeoff",
    "readings",
    "review",
    "cautions",
    "advice",
    "solve",
    "replacement",
    "diagnosis",
    "boards",
    "views",
    "batch",
    "expect",
    "report",
    "present",
    "cli",
)
# Further modules of a room at the top of the package.
SHARED = {"stage_keys": "stage", "stage_file": "stage", "stage_resolve": "stage"}
# The doors: they name what is inside, and every room may ask the first for the version.
DOORS = ("__init__", "__main__")

LONGEST_MODULE = 800
HEAVY = ("pandas", "ortools", "matplotlib", "schemdraw", "scipy.optimize", "scipy.stats")
TOP_LEVEL = {"README.md", "DEVELOPERS.md", "pyproject.toml", "synth", "tables", "tests", "examples"}

MODULES = sorted(HOUSE.rglob("*.py"))
TREES = {path: ast.parse(path.read_text(encoding="utf-8")) for path in MODULES}
every_module = pytest.mark.parametrize("path", MODULES, ids=lambda path: path.relative_to(ROOT).as_posix())

Function = ast.FunctionDef | ast.AsyncFunctionDef


def module_of(path: Path) -> str:
    """Dotted name of a file."""
    parts = path.relative_to(ROOT).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


NAMES = {module_of(path): path for path in MODULES}


def room_of(module: str) -> str:
    """Room that a module of the package belongs to; "" for the package itself."""
    first = [*module.split("."), ""][1]
    return SHARED.get(first, first)


def is_for_checkers(node: ast.AST) -> bool:
    return isinstance(node, ast.If) and "TYPE_CHECKING" in {n.id for n in ast.walk(node.test) if isinstance(n, ast.Name)}


def imports(tree: ast.AST, path: Path) -> Iterator[tuple[str, str, bool]]:
    """Every import of a module of the package: its dotted name, the name it is bound to, whether for type checkers only."""

    def targets(node: ast.AST) -> Iterator[tuple[str, str]]:
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, alias.asname or alias.name.partition(".")[0]
        elif isinstance(node, ast.ImportFrom):
            package = module_of(path) if path.name == "__init__.py" else module_of(path).rpartition(".")[0]
            for _ in range(node.level - 1):
                package = package.rpartition(".")[0]
            source = ".".join(filter(None, (package if node.level else "", node.module or "")))
            for alias in node.names:
                inner = f"{source}.{alias.name}"
                yield (inner if inner in NAMES else source), alias.asname or alias.name

    def walk(node: ast.AST, checking: bool) -> Iterator[tuple[str, str, bool]]:
        for child in ast.iter_child_nodes(node):
            yield from ((name, bound, checking) for name, bound in targets(child))
            if is_for_checkers(child):
                assert isinstance(child, ast.If)
                for part in child.body:
                    yield from ((name, bound, True) for name, bound in targets(part))
                    yield from walk(part, True)
                for part in child.orelse:
                    yield from ((name, bound, checking) for name, bound in targets(part))
                    yield from walk(part, checking)
            else:
                yield from walk(child, checking)

    for name, bound, checking in walk(tree, False):
        if name.split(".")[0] == "synth":
            yield name, bound, checking


def names_used_when_running(tree: ast.AST) -> set[str]:
    """Names that are read anywhere but in an annotation or in a block for type checkers."""
    found: set[str] = set()

    def walk(node: ast.AST) -> None:
        if isinstance(node, ast.Name) and isinstance(node.ctx, ast.Load):
            found.add(node.id)
        for part, value in ast.iter_fields(node):
            if part in ("annotation", "returns") or (is_for_checkers(node) and part == "body"):
                continue
            for child in value if isinstance(value, list) else [value]:
                if isinstance(child, ast.AST):
                    walk(child)

    walk(tree)
    return found


# --- Rooms ----------------------------------------------------------------------------------------------------------


@every_module
def test_module_belongs_to_a_room(path: Path) -> None:
    module = module_of(path)
    assert path.stem in DOORS or room_of(module) in ROOMS


def test_developers_are_shown_the_same_rooms() -> None:
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    rows = regex.findall(r"^\| (`\w+`(?:, `\w+`)*) \|", text, regex.MULTILINE)
    shown = [SHARED.get(name, name) for row in rows for name in regex.findall(r"\w+", row)]
    assert tuple(dict.fromkeys(shown)) == ROOMS


@every_module
def test_module_imports_only_rooms_below(path: Path) -> None:
    if path.parent == HOUSE and path.stem in DOORS:
        pytest.skip("a door leads to every room; see the test of what it loads")
    own = ROOMS.index(room_of(module_of(path)))
    tree = TREES[path]
    used = names_used_when_running(tree)
    again = {bound for _, bound, checking in imports(tree, path) if not checking}
    for name, bound, checking in imports(tree, path):
        if checking and (bound in again or bound not in used):
            # It serves annotations only; a second, real import of the name is judged by itself.
            continue
        other = room_of(name)
        assert other == "" or ROOMS.index(other) <= own, f"{module_of(path)} imports {name}, which is above it"


def test_networks_know_nothing_but_their_form() -> None:
    for path in (HOUSE / "networks").glob("*.py"):
        others = {name for name, _, _ in imports(TREES[path], path)}
        assert others <= {"synth.networks.form"} - {module_of(path)}, path.name


def test_no_modules_import_each_other_in_a_circle() -> None:
    graph = {
        module: {name for name, _, checking in imports(TREES[path], path) if not checking} - {module, "synth"}
        for module, path in NAMES.items()
        if module != "synth"
    }
    # A package imports its own modules, so inside of it only its modules count.
    assert len(list(graphlib.TopologicalSorter(graph).static_order())) >= len(graph)


def test_an_upward_import_is_seen(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The tests above would notice: every way of writing an import leads to the same name."""
    upward = (
        "import synth.cli",
        "from synth import cli",
        "from synth.cli import main",
        "from synth.cli import main as start",
        "def later():\n    from synth.cli import main",
        "from .cli import main",
        "from . import cli",
    )
    for text in upward:
        assert [name for name, _, _ in imports(ast.parse(text), HOUSE / "box.py")] == ["synth.cli"]
    guarded = ast.parse("if TYPE_CHECKING:\n    from synth.cli import main\nx: main\ny = main")
    assert [checking for _, _, checking in imports(guarded, HOUSE / "box.py")] == [True]
    assert "main" in names_used_when_running(guarded)
    assert "main" not in names_used_when_running(ast.parse("def f(x: main) -> main: ..."))


# --- What is loaded -------------------------------------------------------------------------------------------------


def loaded_by(statement: str) -> set[str]:
    """Modules that a fresh interpreter has after a statement."""
    script = f"import sys\ntry:\n    {statement}\nexcept SystemExit:\n    pass\nprint('\\n', *sys.modules, sep='\\n')"
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    ran = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True, env=environment)
    return set(ran.stdout.splitlines())


def test_core_loads_no_heavy_library() -> None:
    modules = loaded_by("import synth.solve, synth.advice, synth.present.terminal, synth.present.catalogue, synth.cli")
    assert "synth.search" in modules
    assert not modules & set(HEAVY)


def test_finding_loads_no_heavy_library() -> None:
    """Not even where a function imports only when it runs."""
    options = ["--supply", "12V", "--ic", "2mA", "--vce", "5V", "--hfe", "110:450", "--series", "E6"]
    modules = loaded_by(f"from synth.cli import main; main(['find', *{options}])")
    assert "synth.search" in modules
    assert not modules & set(HEAVY)


@pytest.mark.parametrize("option", ["--help", "--version"])
def test_help_loads_no_numbers(option: str) -> None:
    modules = loaded_by(f"from synth.cli import main; main(['{option}'])")
    assert "synth.cli" in modules
    assert not modules & {"numpy", "scipy", *HEAVY}


def test_the_package_itself_loads_nothing() -> None:
    modules = {name for name in loaded_by("import synth") if name.startswith("synth")}
    assert modules == {"synth"}


def test_public_names_are_sorted_and_there() -> None:
    import synth

    assert list(synth.__all__) == sorted(synth.__all__)
    for name in synth.__all__:
        assert getattr(synth, name) is not None
    with pytest.raises(AttributeError, match=r"no attribute 'refind'"):
        synth.refind  # noqa: B018


# --- Documentation --------------------------------------------------------------------------------------------------

SECTIONS = ("Parameters", "Attributes", "Returns", "Yields", "Raises", "Notes", "Examples", "References", "See Also")
UNIT = regex.compile(r"\[[^\]\n]+\]")
# A number whose unit matters; what a callable takes is described in words.
NUMBER = regex.compile(r"\b(float|Array|Value)\b|NDArray\[np\.float64\]")


def listed(tree: ast.Module) -> set[str] | None:
    """Names in the ``__all__`` of a module; None if it has none."""
    for node in tree.body:
        if isinstance(node, ast.Assign) and ast.unparse(node.targets[0]) == "__all__":
            return set(ast.literal_eval(node.value))
    return None


def public(path: Path) -> Iterator[tuple[str, ast.ClassDef | Function, bool]]:
    """Public classes, functions and methods of a module: name, node, whether it is a method.

    A package that says what it shows to others keeps the rest of its modules to itself.
    """
    shown = None if path.parent == HOUSE else listed(TREES[path.parent / "__init__.py"])
    for node in TREES[path].body:
        if not isinstance(node, ast.ClassDef | Function) or node.name.startswith("_"):
            continue
        if shown is None or node.name in shown:
            yield node.name, node, False
            if isinstance(node, ast.ClassDef):
                for part in node.body:
                    if isinstance(part, Function) and not part.name.startswith("_"):
                        yield f"{node.name}.{part.name}", part, True


def section(docstring: str, title: str) -> list[tuple[str, str, str]]:
    """Entries of a section of a numpydoc docstring: names, type, description."""
    lines = docstring.splitlines()
    try:
        start = next(i for i, line in enumerate(lines) if line == title and set(lines[i + 1]) == {"-"})
    except (StopIteration, IndexError):
        return []
    body: list[str] = []
    for i in range(start + 2, len(lines)):
        if lines[i] in SECTIONS and i + 1 < len(lines) and set(lines[i + 1]) == {"-"}:
            break
        body.append(lines[i])
    entries: list[tuple[str, str, str]] = []
    for line in body:
        if line and not line.startswith(" "):
            names, _, kind = line.partition(" : ")
            entries.append((names, kind, ""))
        elif line and entries:
            names, kind, text = entries[-1]
            entries[-1] = (names, kind, f"{text} {line.strip()}")
    return entries


def decorators(node: ast.ClassDef | Function) -> set[str]:
    return {ast.unparse(d).partition("(")[0].rpartition(".")[2] for d in node.decorator_list}


def arguments(node: Function, is_method: bool) -> dict[str, str]:
    """Arguments of a function and their annotations."""
    a = node.args
    given = [*a.posonlyargs, *a.args, *([a.vararg] if a.vararg else []), *a.kwonlyargs, *([a.kwarg] if a.kwarg else [])]
    if is_method and "staticmethod" not in decorators(node):
        given = given[1:]
    return {arg.arg: ast.unparse(arg.annotation) if arg.annotation else "" for arg in given}


def fields(node: ast.ClassDef) -> dict[str, str]:
    """What a class is made from, and the annotations: the arguments of its __init__, else its fields."""
    for part in node.body:
        if isinstance(part, Function) and part.name == "__init__":
            return arguments(part, True)
    return {
        part.target.id: ast.unparse(part.annotation)
        for part in node.body
        if isinstance(part, ast.AnnAssign)
        and isinstance(part.target, ast.Name)
        and not part.target.id.startswith("_")
        and "init=False" not in ast.unparse(part).replace(" ", "")
    }


def is_number(annotation: str) -> bool:
    return "Callable" not in annotation and bool(NUMBER.search(annotation))


def documented() -> list[tuple[str, ast.ClassDef | Function, bool]]:
    found = []
    for path in TREES:
        if path.stem != "__main__":
            found += [(f"{module_of(path)}.{name}", node, method) for name, node, method in public(path)]
    return found


every_public_thing = pytest.mark.parametrize(
    ("node", "is_method"),
    [pytest.param(node, method, id=name.removeprefix("synth.")) for name, node, method in documented()],
)


@every_module
def test_module_says_what_it_is(path: Path) -> None:
    assert ast.get_docstring(TREES[path])


@every_public_thing
def test_parameters_are_those_of_the_signature(node: ast.ClassDef | Function, is_method: bool) -> None:
    docstring = ast.get_docstring(node)
    assert docstring, "no docstring"
    written = [
        name.strip().lstrip("*") for names, _, _ in section(docstring, "Parameters") for name in names.split(",")
    ]
    if isinstance(node, ast.ClassDef):
        # A small value may say in one sentence what its fields are; fields are given by name, so their order is free.
        assert not written or sorted(written) == sorted(fields(node))
    else:
        assert written == list(arguments(node, is_method))


@every_public_thing
def test_numbers_have_a_unit(node: ast.ClassDef | Function, is_method: bool) -> None:
    docstring = ast.get_docstring(node) or ""
    entries = section(docstring, "Parameters")
    annotations = fields(node) if isinstance(node, ast.ClassDef) else arguments(node, is_method)
    described = {
        name.strip().lstrip("*"): f"{kind} {text}" for names, kind, text in entries for name in names.split(",")
    }
    for name, annotation in annotations.items():
        if is_number(annotation):
            has_unit = bool(UNIT.search(described.get(name, docstring)))
            assert has_unit, f"{name} : {annotation} has no unit"


@every_public_thing
def test_what_is_returned_is_described(node: ast.ClassDef | Function, is_method: bool) -> None:
    if isinstance(node, ast.ClassDef):
        return
    docstring = ast.get_docstring(node) or ""
    kind = ast.unparse(node.returns) if node.returns else ""
    if decorators(node) & {"property", "cached_property"}:
        returned = docstring
    else:
        returned = " ".join(" ".join(entry) for entry in section(docstring, "Returns"))
        assert bool(returned) == (kind not in ("None", "NoReturn", "Never"))
    if is_number(kind):
        has_unit = bool(UNIT.search(returned))
        assert has_unit, "the result has no unit"


# --- Form -----------------------------------------------------------------------------------------------------------


@every_module
def test_module_is_not_too_long(path: Path) -> None:
    lines = path.read_text(encoding="utf-8").count("\n")
    assert lines < LONGEST_MODULE


@every_module
def test_the_emitter_resistor_keeps_its_name(path: Path) -> None:
    """`re` is the emitter resistor: no module may stand for it."""
    for node in ast.walk(TREES[path]):
        if isinstance(node, ast.Import):
            assert "re" not in {alias.asname or alias.name for alias in node.names}


@every_module
def test_functions_are_typed(path: Path) -> None:
    """Every argument and result of a function has an annotation; what they are worth is the type checker's business."""
    for node in ast.walk(TREES[path]):
        if isinstance(node, Function):
            given = [*node.args.posonlyargs, *node.args.args, *node.args.kwonlyargs]
            bare = [arg.arg for arg in given if arg.annotation is None and arg.arg not in ("self", "cls")]
            assert node.returns is not None, f"{node.name} has no result type"
            assert not bare, f"{node.name} has bare arguments"


def test_package_says_that_it_is_typed() -> None:
    assert (HOUSE / "py.typed").exists()


def test_top_level_holds_only_what_belongs_there() -> None:
    if not (ROOT / ".git").exists():
        pytest.skip("not a checkout")
    command = ["git", "-C", str(ROOT), "ls-files", "--cached", "--others", "--exclude-standard"]
    listed = subprocess.run(command, capture_output=True, text=True, check=True).stdout.splitlines()
    top = {name.partition("/")[0] for name in listed}
    assert {name for name in top if not name.startswith(".")} <= TOP_LEVEL
    assert top >= {"synth", "tables", "tests", "examples", "pyproject.toml"}
