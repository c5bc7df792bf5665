"""The house itself: who imports whom, what a start costs, and what every function must have."""

from __future__ import annotations

import ast
import json
import re
import shutil
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

import relorbit

PACKAGE = Path(relorbit.__file__).parent
ROOT = PACKAGE.parent
FILES = sorted(PACKAGE.rglob("*.py"))
HEAVY = ("matplotlib", "scipy", "astropy", "corner", "tkinter", "pandas")


def name_of(path: Path) -> str:
    return path.relative_to(ROOT).as_posix()


def tree_of(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"))


def run(*words: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, *words], capture_output=True, text=True, cwd=ROOT, timeout=300
    )


def modules_after(statement: str) -> set[str]:
    """Top-level names of everything imported once `statement` has run in a fresh process."""
    report = "import json, sys; print(); print(json.dumps(sorted(sys.modules)))"
    done = run("-W", "error", "-c", f"{statement}\n{report}")
    assert done.returncode == 0, done.stderr
    return {module.split(".")[0] for module in json.loads(done.stdout.splitlines()[-1])}


# ---- floors


@pytest.mark.skipif(not (ROOT / "pyproject.toml").exists(), reason="not in the source tree")
def test_knowledge_flows_one_way() -> None:
    pytest.importorskip("importlinter")
    command = "from importlinter.cli import lint_imports_command as c; c(prog_name='lint-imports')"
    done = run("-c", command, "--no-cache")
    assert done.returncode == 0, done.stdout + done.stderr
    assert re.search(r"[1-9][0-9]* kept, 0 broken", done.stdout)


def imports_at_the_top(path: Path) -> Iterator[str]:
    """Modules imported when the module itself is, those for type checking left out."""
    nodes = list(tree_of(path).body)
    while nodes:
        node = nodes.pop()
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            yield node.module or ""
        elif isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test):
            nodes.extend(node.orelse)
        elif isinstance(node, ast.If | ast.Try | ast.With | ast.ClassDef):
            nodes.extend(child for child in ast.iter_child_nodes(node))


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_heavy_libraries_are_imported_where_they_belong(path: Path) -> None:
    room = path.relative_to(PACKAGE).parts[0]
    top = {name.split(".")[0] for name in imports_at_the_top(path)}
    if room == "orbit":
        assert top <= {"__future__", "numpy", "relorbit", "collections", "dataclasses",
                       "functools", "math", "typing"}  # fmt: skip
    if room in ("measures", "cli", "solve", "derive", "__init__.py", "__main__.py", "errors.py"):
        assert not top & {"matplotlib", "astropy", "corner", "tkinter"}
    if room in ("measures", "cli"):
        assert "scipy" not in top
    if room not in ("show", "desk"):
        assert "matplotlib" not in top


# ---- what a start costs


@pytest.mark.parametrize(
    "words", [["--help"], ["--version"], [], ["--no-such-option"]], ids=" ".join
)
def test_a_start_without_a_verb_imports_nothing_heavy(words: list[str]) -> None:
    statement = (
        "from relorbit.cli.main import main\n"
        f"try:\n    main({words!r})\nexcept SystemExit:\n    pass"
    )
    found = modules_after(statement)
    assert "relorbit" in found
    assert not found & {*HEAVY, "numpy"}


@pytest.mark.parametrize(
    "verb", ["intake", "solve", "ephemeris", "residuals", "between", "weigh", "draw"]
)
def test_help_of_a_verb_imports_nothing_heavy(verb: str) -> None:
    statement = (
        "from relorbit.cli.main import main\n"
        f"try:\n    main([{verb!r}, '--help'])\nexcept SystemExit:\n    pass"
    )
    assert not modules_after(statement) & set(HEAVY)


def test_the_package_imports_nothing_until_a_name_is_used() -> None:
    assert not modules_after("import relorbit") & {*HEAVY, "numpy"}
    assert not modules_after("import relorbit; relorbit.Elements; relorbit.Pair") & set(HEAVY)
    assert not modules_after("import relorbit; relorbit.solve") & {"matplotlib", "astropy"}


def test_every_promised_name_is_there() -> None:
    for name in relorbit.__all__:
        assert getattr(relorbit, name) is not None
    assert {"read", "solve", "ephemeris", "Pair", "Elements", "Solution"} <= set(dir(relorbit))
    with pytest.raises(AttributeError, match="has no attribute 'orbits'"):
        relorbit.orbits  # noqa: B018


# ---- the text of the code


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_only_the_command_line_prints_and_nothing_is_left_to_do(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    assert not re.search(r"\b(TODO|FIXME|XXX|HACK)\b", text)
    called = {
        node.func.id
        for node in ast.walk(tree_of(path))
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name)
    }
    assert not called & {"breakpoint", "eval", "exec", "input"}
    if path.relative_to(PACKAGE).parts[0] != "cli":
        assert "print" not in called


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_no_bare_except_and_no_assert_on_input(path: Path) -> None:
    for node in ast.walk(tree_of(path)):
        assert not isinstance(node, ast.Assert), f"line {node.lineno}: assert"
        assert not (isinstance(node, ast.ExceptHandler) and node.type is None), node.lineno


def undocumented(tree: ast.Module) -> Iterator[str]:
    """Public functions and classes without a docstring; obvious small methods are let go."""
    for node in tree.body:
        if not isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.ClassDef):
            continue
        if node.name.startswith("_"):
            continue
        if not ast.get_docstring(node):
            yield node.name


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_every_public_function_and_class_is_documented(path: Path) -> None:
    tree = tree_of(path)
    room = path.relative_to(PACKAGE).parts[0]
    # the two functions that every verb has are documented once, where the verbs are listed
    verbs = {"configure", "run"} if room == "cli" or path.name == "verb.py" else set()
    assert [name for name in undocumented(tree) if name not in verbs] == []
    if path.name != "__init__.py":
        assert ast.get_docstring(tree), "the module says nothing of itself"


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_every_public_function_has_type_hints(path: Path) -> None:
    for node in tree_of(path).body:
        if isinstance(node, ast.FunctionDef) and not node.name.startswith("_"):
            given = [*node.args.posonlyargs, *node.args.args, *node.args.kwonlyargs]
            bare = [one.arg for one in given if one.annotation is None]
            assert not bare, f"{node.name}: {bare}"
            assert node.returns is not None, node.name


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_files_and_functions_stay_small(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 410
    for node in ast.walk(tree_of(path)):
        if isinstance(node, ast.FunctionDef):
            doc = ast.get_docstring(node, clean=False)
            lines = node.end_lineno - node.lineno + 1 - (len(doc.splitlines()) if doc else 0)
            assert lines <= 60, f"{node.name} has {lines} lines"


@pytest.mark.skipif(not (ROOT / "pyproject.toml").exists(), reason="not in the source tree")
def test_ruff_finds_nothing() -> None:
    ruff = shutil.which("ruff", path=str(Path(sys.executable).parent)) or shutil.which("ruff")
    if ruff is None:
        pytest.skip("ruff is not installed")
    done = subprocess.run(
        [ruff, "check", "--no-cache", "relorbit", "tests"], capture_output=True, text=True, cwd=ROOT
    )
    assert done.returncode == 0, done.stdout


@pytest.mark.skipif(not (ROOT / "pyproject.toml").exists(), reason="not in the source tree")
def test_no_path_of_one_machine_in_the_project() -> None:
    """Folders that only exist where somebody works: a home, a temporary or a working folder."""
    home = re.compile(r"(/home/|/Users/|/root/|/opt/|/w[o]rk/|/tmp/|[A-Z]:\\\\Users)")
    here = Path(__file__)
    for folder in ("relorbit", "tests", "example_measures"):
        for path in sorted((ROOT / folder).rglob("*")):
            if path.suffix in (".py", ".md", ".toml", ".txt", ".csv", ".ecsv") and path != here:
                text = path.read_text(encoding="utf-8")
                assert not home.search(text), path
