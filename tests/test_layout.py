"""The shape of the package: which module may import which, what loads when, sizes, docstrings, no network."""

from __future__ import annotations

import ast
import shutil
import subprocess
import sys
import tomllib
from collections.abc import Iterator
from dataclasses import dataclass
from fnmatch import fnmatch
from functools import cache
from graphlib import TopologicalSorter
from pathlib import Path

import pytest

TOP = Path(__file__).parents[1]
PACKAGE = TOP / "reach"

# Low to high: a module imports from its own level or a lower one. The longest entry that fits counts.
LEVELS = (
    ("errors", "workers"),
    ("cell",),
    ("paddle", "ball", "variants"),
    ("arm",),
    ("kinematics", "posture"),
    ("limits",),
    ("evidence",),
    ("verdict",),
    ("result",),
    ("qp",),
    ("strike",),
    ("survey", "follow"),
    ("advice", "rally"),
    ("trial",),
    ("formats",),
    ("recheck",),
    ("report",),
    ("describe",),
    ("api", ""),  # "" is the package itself, which hands names on
    ("cli",),
    ("__main__",),
)

# All that these may import of the package, besides themselves.
ALONE = {
    "errors": (),
    "cell": ("errors",),
    "paddle": ("cell", "errors"),
    "recheck": ("errors", "evidence.items", "formats.files", "formats.xml_tree"),
    "verdict": (
        "cell",
        "evidence.items",
        "evidence.record",
        "evidence.points",
        "evidence.rallies",
        "evidence.trials",
    ),
    "ball": ("cell", "errors"),
    "formats": ("cell", "errors", "ball"),
    "qp": ("cell", "errors"),
    "report": (
        "cell",
        "errors",
        "evidence.record",
        "evidence.motion",
        "evidence.points",
        "evidence.rallies",
        "evidence.trials",
        "evidence.items",
        "verdict",
        "result",
    ),
}

# The one module that imports each of these.
SOLE = {
    "pinocchio": "arm",
    "qpsolvers": "qp.backends",
    "matplotlib": "report.figures",
    "mujoco": "recheck.arm.engine",
}

# What `import reach` must not load.
HEAVY = ("matplotlib", "qpsolvers", "pinocchio", "scipy", "daqp", "piqp")

FILES = ("os", "io", "pathlib", "tempfile", "shutil", "json", "csv", "tomllib", "xml")
NETWORK = ("socket", "socketserver", "ssl", "urllib", "http", "requests", "httpx", "aiohttp", "asyncio")
NETWORK += ("ftplib", "smtplib", "xmlrpc", "webbrowser", "telnetlib", "poplib", "imaplib")
UNSAFE_MODULES = ("pickle", "marshal", "shelve", "dill", "cloudpickle", "joblib", "code", "ctypes")
UNSAFE_CALLS = ("eval", "exec", "compile", "__import__")

# Modules that import by a name made at run time, all names being their own.
LATE = {"": "names handed on when first used", "report.writers": "writers loaded when first called"}

LINES = 350
FUNCTION_LINES = 60
LONG_FUNCTIONS = {
    "api.follow_commands": "two thirds are its signature and docstring",
    "advice.answer.answer": "one call after another, and then the result with its many fields",
}

TOP_NAMES = ("README.md", "DEVELOPERS.md", "LICENSE", "pyproject.toml", ".ci/run")
TOP_FOLDERS = ("reach", "robots", "tests", "examples")

Function = ast.FunctionDef | ast.AsyncFunctionDef


@dataclass(frozen=True)
class Module:
    """A parsed module; its name is without the package's."""

    name: str
    path: Path
    tree: ast.Module
    text: str

    def __str__(self) -> str:
        return self.name or "reach"


@cache
def modules() -> dict[str, Module]:
    """Every module of the package by name."""
    found = {}
    for path in sorted(PACKAGE.rglob("*.py")):
        parts = path.relative_to(PACKAGE).with_suffix("").parts
        name = ".".join(part for part in parts if part != "__init__")
        text = path.read_text(encoding="utf-8")
        found[name] = Module(name, path, ast.parse(text), text)
    return found


def absolute_imports(module: Module) -> Iterator[tuple[str, str | None]]:
    """Each import as (module, name taken from it, None for the module itself)."""
    for node in ast.walk(module.tree):
        if isinstance(node, ast.Import):
            yield from ((alias.name, None) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0 and node.module, f"{module} line {node.lineno}: relative import"
            yield from ((node.module, alias.name) for alias in node.names)


@cache
def homes() -> dict[str, str]:
    """Where the names live that the package hands on."""
    for node in modules()[""].tree.body:
        if isinstance(node, ast.Assign) and ast.unparse(node.targets[0]) == "_HOMES":
            return {name: home.removeprefix("reach.") for name, home in ast.literal_eval(node.value).items()}
    raise AssertionError("_HOMES is gone")


def own_imports(module: Module) -> set[str]:
    """Modules of the package that a module imports; a name that the package hands on counts as its home."""
    found = set()
    for source, name in absolute_imports(module):
        if source.partition(".")[0] != "reach":
            continue
        place = source.removeprefix("reach").removeprefix(".")
        inner = f"{place}.{name}".removeprefix(".")
        if name is not None and inner in modules():
            found.add(inner)
        elif place:
            assert place in modules(), f"{module} imports {source}, which does not exist"
            found.add(place)
        elif name is not None and name != "__version__":
            found.add(homes()[name])
    return found - {module.name}


def outside_imports(module: Module) -> set[str]:
    """Top names of the modules outside the package that a module imports."""
    return {source.partition(".")[0] for source, _ in absolute_imports(module)} - {"reach"}


def within(name: str, entry: str) -> bool:
    """Whether a module is that of an entry, or lies in its package."""
    return name == entry or (entry != "" and name.startswith(entry + "."))


def level(name: str) -> int:
    """Level of a module."""
    fitting = [(len(entry), i) for i, row in enumerate(LEVELS) for entry in row if within(name, entry)]
    assert fitting, f"{name} has no level; give it one"
    return max(fitting)[1]


def every(name: str) -> Iterator[Module]:
    """The modules of an entry."""
    found = [module for module in modules().values() if within(module.name, name)]
    assert found, f"{name} is gone"
    yield from found


def test_every_entry_of_the_table_names_a_module() -> None:
    for row in LEVELS:
        for entry in row:
            assert any(within(name, entry) for name in modules()), entry


def test_no_module_imports_from_a_higher_level() -> None:
    pairs = [(name, other) for name, module in modules().items() for other in own_imports(module)]
    assert len(pairs) > 100
    assert not [f"{name} imports {other}" for name, other in pairs if level(other) > level(name)]


@pytest.mark.parametrize("entry", ALONE)
def test_some_import_little_of_the_package(entry: str) -> None:
    allowed = (entry, *ALONE[entry])
    for module in every(entry):
        other = [name for name in own_imports(module) if not any(within(name, one) for one in allowed)]
        assert not other, f"{module} imports {other}"


def test_evidence_rests_on_no_solver() -> None:
    for module in every("evidence"):
        assert not [name for name in own_imports(module) if within(name, "qp")]


def test_cell_is_data_only() -> None:
    cell = modules()["cell"]
    assert not outside_imports(cell) & set(FILES)
    assert not [node for node in ast.walk(cell.tree) if called(node) == "open"]


@pytest.mark.parametrize("library", SOLE)
def test_each_heavy_library_has_one_importer(library: str) -> None:
    importers = [name for name, module in modules().items() if library in outside_imports(module)]
    assert importers == [SOLE[library]]


def test_no_import_goes_in_a_circle() -> None:
    graph = {name: own_imports(module) for name, module in modules().items()}
    done: set[str] = set()

    def visit(name: str, way: tuple[str, ...]) -> None:
        assert name not in way, " -> ".join((*way[way.index(name) :], name))
        if name not in done:
            for other in sorted(graph[name]):
                visit(other, (*way, name))
            done.add(name)

    for name in graph:
        visit(name, ())


def test_no_module_is_a_drawer() -> None:
    parts = {part for name in modules() for part in name.split(".")}
    assert not parts & {"utils", "util", "common", "helpers", "helper", "misc"}


def in_fresh_process(code: str) -> str:
    """Standard output of a program in an interpreter of its own, where a warning is an error."""
    command = [sys.executable, "-W", "error", "-c", code]
    done = subprocess.run(command, capture_output=True, text=True, cwd=TOP, timeout=120)
    assert done.returncode == 0, done.stderr
    return done.stdout


def loaded_with(module: Module) -> set[str]:
    """Modules of the package that loading a module loads first; those it imports when asked later are left out."""
    body = [node for node in module.tree.body if not isinstance(node, ast.FunctionDef | ast.If)]
    inside = ast.Module([node for node in body if not isinstance(node, ast.ClassDef)], [])
    return own_imports(Module(module.name, module.path, inside, module.text))


def test_each_module_imports_alone() -> None:
    """No module waits for another that waits for it, so any may be the first; and all of them do load."""
    graph = {name: loaded_with(module) for name, module in modules().items()}
    assert sum(map(len, graph.values())) > 500
    TopologicalSorter(graph).prepare()  # raises where they go round
    names = [f"reach.{name}" if name else "reach" for name in modules() if name != "__main__"]
    assert len(names) > 200
    in_fresh_process(f"import {', '.join(names)}")


@pytest.mark.parametrize("name", ["reach", "reach.cli"])
def test_nothing_heavy_is_loaded_at_once(name: str) -> None:
    code = f"import sys, {name}; print(*sorted({{key.partition('.')[0] for key in sys.modules}}))"
    loaded = in_fresh_process(code).split()
    assert "reach" in loaded
    assert not set(loaded) & set(HEAVY)


@cache
def classes() -> dict[str, ast.ClassDef]:
    """Every class by its name."""
    trees = (ast.walk(module.tree) for module in modules().values())
    return {node.name: node for tree in trees for node in tree if isinstance(node, ast.ClassDef)}


def told_by_base(owner: ast.AST, name: str) -> bool:
    """Whether a class has its method's description from a base, whose contract it fulfils."""
    bases = [ast.unparse(base) for base in owner.bases] if isinstance(owner, ast.ClassDef) else []
    for base in (classes()[text] for text in bases if text in classes()):
        own = [node for node in base.body if isinstance(node, Function) and node.name == name]
        if any(ast.get_docstring(node) for node in own) or told_by_base(base, name):
            return True
    return False


def bare(tree: ast.Module | ast.ClassDef, name: str) -> Iterator[str]:
    """Each public class, function and method that is described nowhere."""
    for node in tree.body:
        if isinstance(node, Function | ast.ClassDef) and node.name[0] != "_":
            if not ast.get_docstring(node) and not told_by_base(tree, node.name):
                yield f"{name}.{node.name}"
            if isinstance(node, ast.ClassDef):
                yield from bare(node, f"{name}.{node.name}")


def test_everything_public_is_documented() -> None:
    assert not [name for name, module in modules().items() if not ast.get_docstring(module.tree)]
    assert not [found for name, module in modules().items() for found in bare(module.tree, name)]


def functions(node: ast.AST, name: str) -> Iterator[tuple[str, Function]]:
    """Every function with its dotted name."""
    for child in ast.iter_child_nodes(node):
        if isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef):
            yield f"{name}.{child.name}", child
        inner = f"{name}.{child.name}" if isinstance(child, Function | ast.ClassDef) else name
        yield from functions(child, inner)


def length(function: Function) -> int:
    """Lines from its `def` to its end."""
    assert function.end_lineno is not None
    return function.end_lineno - function.lineno + 1


def test_modules_stay_short() -> None:
    lines = {name: len(module.text.splitlines()) for name, module in modules().items()}
    assert not {name: count for name, count in lines.items() if count > LINES}


def test_functions_stay_short_but_for_those_with_a_reason() -> None:
    found = [pair for module in modules().values() for pair in functions(module.tree, module.name)]
    assert len(found) > 200
    long = {name: length(function) for name, function in found if length(function) > FUNCTION_LINES}
    assert not {name: lines for name, lines in long.items() if name not in LONG_FUNCTIONS}
    assert set(LONG_FUNCTIONS) <= {name for name, _ in found}


def called(node: ast.AST) -> str:
    """Name of the plain function that a node calls, else nothing."""
    return node.func.id if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) else ""


def test_only_the_command_line_prints() -> None:
    prints = {
        n for n, module in modules().items() for node in ast.walk(module.tree) if called(node) == "print"
    }
    assert prints == {"cli"}


def test_no_network() -> None:
    found = {name: outside_imports(module) & set(NETWORK) for name, module in modules().items()}
    assert not {name: used for name, used in found.items() if used}


def unsafe(module: Module) -> Iterator[str]:
    """What in a module could run what it reads."""
    yield from outside_imports(module) & set(UNSAFE_MODULES)
    for node in ast.walk(module.tree):
        if called(node) in UNSAFE_CALLS:
            yield ast.unparse(node)
        if isinstance(node, ast.keyword) and node.arg in ("allow_pickle", "shell"):
            yield from [] if ast.unparse(node.value) == "False" else [ast.unparse(node)]
        if isinstance(node, ast.Call) and ast.unparse(node.func).endswith("import_module"):
            yield from [] if module.name in LATE else [ast.unparse(node)]


def test_nothing_runs_what_it_reads() -> None:
    found = {name: list(unsafe(module)) for name, module in modules().items()}
    assert not {name: used for name, used in found.items() if used}


def ignored(name: str) -> bool:
    """Whether the ignore file names a top-level name."""
    patterns = (TOP / ".gitignore").read_text(encoding="utf-8").split()
    return any(fnmatch(name, pattern.rstrip("/")) for pattern in patterns)


def top_names() -> set[str]:
    """What stands at the top: what is tracked, or outside a checkout what is not ignored."""
    git = shutil.which("git")
    if git and (TOP / ".git").exists():
        done = subprocess.run([git, "ls-files"], cwd=TOP, capture_output=True, text=True)
        if done.returncode == 0 and done.stdout:
            return {line.partition("/")[0].strip('"') for line in done.stdout.splitlines()}
    return {path.name for path in TOP.iterdir() if not ignored(path.name)}


@pytest.mark.parametrize("name", [*TOP_NAMES, *TOP_FOLDERS])
def test_the_top_has_what_a_newcomer_looks_for(name: str) -> None:
    assert (TOP / name).exists()


def test_the_top_has_nothing_else() -> None:
    wanted = {*TOP_NAMES, *TOP_FOLDERS}
    assert not {name for name in top_names() if name not in wanted and not name.startswith(".")}


def test_every_package_is_distributed() -> None:
    packages = {str(path.parent.relative_to(TOP)).replace("/", ".") for path in PACKAGE.rglob("__init__.py")}
    project = tomllib.loads((TOP / "pyproject.toml").read_text(encoding="utf-8"))
    assert set(project["tool"]["setuptools"]["packages"]) == packages
    assert (PACKAGE / "py.typed").exists()
