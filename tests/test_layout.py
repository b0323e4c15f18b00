"""The shape of the package: which module may import which, what loads when, sizes, docstrings, no network."""

from __future__ import annotations

import ast
import json
import re
import shutil
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import dataclass
from fnmatch import fnmatch
from functools import cache
from pathlib import Path

import pytest

TOP = Path(__file__).parents[1]
PACKAGE = TOP / "reach"

# Low to high: a module imports from its own level or a lower one. The longest entry that fits a module counts.
LEVELS = (
    ("errors",),
    ("cell",),
    ("paddle",),
    ("arm",),
    ("kinematics", "posture"),
    ("limits",),
    ("evidence",),
    ("verdict",),
    ("result",),
    ("qp",),
    ("follow",),
    ("formats",),
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
    "verdict": ("cell", "evidence.record"),
    "formats": ("cell", "errors"),
    "qp": ("cell", "errors"),
    "report": ("cell", "errors", "evidence.record", "evidence.motion", "verdict", "result"),
}

# The one module that imports each of these.
SOLE = {
    "pinocchio": "arm",
    "qpsolvers": "qp.backends",
    "matplotlib": "report.figures",
}

# What `import reach` must not load.
HEAVY = ("matplotlib", "qpsolvers", "pinocchio", "scipy", "daqp", "piqp")

FILES = ("os", "io", "pathlib", "tempfile", "shutil", "json", "csv", "tomllib", "xml")
NETWORK = ("socket", "socketserver", "ssl", "urllib", "http", "requests", "httpx", "aiohttp", "ftplib", "smtplib")
NETWORK += ("xmlrpc", "asyncio", "webbrowser", "telnetlib", "poplib", "imaplib")
UNSAFE_MODULES = ("pickle", "marshal", "shelve", "dill", "cloudpickle", "joblib", "code", "ctypes")
UNSAFE_CALLS = ("eval", "exec", "compile", "__import__")

# Modules that import by a name made at run time, all names being their own.
LATE = {"": "names handed on when first used", "report.writers": "writers loaded when first called"}

LINES = 350
FUNCTION_LINES = 60
LONG_FUNCTIONS: dict[str, str] = {
    "follow.answer.answer": "one call after another, no branch worth a name",
    "api.follow_commands": "two thirds are its docstring",
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


def in_each_module(test: object) -> object:
    """Run a test on every module."""
    return pytest.mark.parametrize("module", modules().values(), ids=str)(test)  # type: ignore[arg-type]


def test_every_entry_of_the_table_names_a_module() -> None:
    for row in LEVELS:
        for entry in row:
            assert any(within(name, entry) for name in modules()), entry


@in_each_module
def test_no_module_imports_from_a_higher_level(module: Module) -> None:
    higher = [name for name in own_imports(module) if level(name) > level(module.name)]
    assert not higher, f"{module} imports {higher}"


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


def test_each_module_imports_alone() -> None:
    names = [f"reach.{name}" if name else "reach" for name in modules() if name != "__main__"]
    assert len(names) > 40
    code = f"""
import importlib, json, sys, traceback
failed = {{}}
for name in {names!r}:
    for loaded in [key for key in sys.modules if key.partition(".")[0] == "reach"]:
        del sys.modules[loaded]
    try:
        importlib.import_module(name)
    except Exception:
        failed[name] = traceback.format_exc()
print(json.dumps(failed))
"""
    assert json.loads(in_fresh_process(code)) == {}


@pytest.mark.parametrize("name", ["reach", "reach.cli", "reach.report"])
def test_nothing_heavy_is_loaded_at_once(name: str) -> None:
    code = f"import sys, {name}; print(*sorted({{key.partition('.')[0] for key in sys.modules}}))"
    loaded = in_fresh_process(code).split()
    assert "reach" in loaded
    assert not set(loaded) & set(HEAVY)


def test_no_drawing_library_is_loaded_to_follow() -> None:
    code = "import sys, reach; reach.load_cell, reach.follow_commands; print('matplotlib' in sys.modules)"
    assert in_fresh_process(code).strip() == "False"


def documented(tree: ast.Module | ast.ClassDef, name: str) -> Iterator[tuple[str, bool]]:
    """Each public class, function and method, and whether it has a docstring."""
    for node in tree.body:
        if isinstance(node, ast.ClassDef | ast.FunctionDef | ast.AsyncFunctionDef) and node.name[0] != "_":
            yield f"{name}.{node.name}", bool(ast.get_docstring(node))
            if isinstance(node, ast.ClassDef):
                yield from documented(node, f"{name}.{node.name}")


@in_each_module
def test_everything_public_is_documented(module: Module) -> None:
    assert ast.get_docstring(module.tree), f"{module} has no docstring"
    bare = [name for name, has in documented(module.tree, module.name) if not has]
    assert not bare


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


@in_each_module
def test_modules_and_functions_stay_short(module: Module) -> None:
    assert module.text.count("\n") <= LINES
    found = {name: length(function) for name, function in functions(module.tree, module.name)}
    long = {name: lines for name, lines in found.items() if lines > FUNCTION_LINES}
    assert not {name: lines for name, lines in long.items() if name not in LONG_FUNCTIONS}


def test_each_long_function_listed_is_one() -> None:
    found = {n: length(f) for m in modules().values() for n, f in functions(m.tree, m.name)}
    assert all(found[name] > FUNCTION_LINES for name in LONG_FUNCTIONS)


def called(node: ast.AST) -> str:
    """Name of the plain function that a node calls, else nothing."""
    return node.func.id if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) else ""


@in_each_module
def test_only_the_command_line_prints(module: Module) -> None:
    prints = [node for node in ast.walk(module.tree) if called(node) == "print"]
    assert not prints or module.name == "cli"


@in_each_module
def test_no_network_and_nothing_that_runs_what_it_reads(module: Module) -> None:
    assert not outside_imports(module) & {*NETWORK, *UNSAFE_MODULES}
    for node in ast.walk(module.tree):
        assert called(node) not in UNSAFE_CALLS, f"{module} line {getattr(node, 'lineno', 0)}"
        if isinstance(node, ast.keyword) and node.arg in ("allow_pickle", "shell"):
            assert isinstance(node.value, ast.Constant) and node.value.value is False
    late = [node for node in ast.walk(module.tree) if isinstance(node, ast.Call)]
    by_name = [node for node in late if ast.unparse(node.func).endswith("import_module")]
    assert not by_name or module.name in LATE


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
    listed = re.search(r"^packages = \[(.*?)\]", (TOP / "pyproject.toml").read_text(encoding="utf-8"), re.S | re.M)
    assert listed is not None
    assert set(re.findall(r'"(.+?)"', listed[1])) == packages
    assert (PACKAGE / "py.typed").exists()
