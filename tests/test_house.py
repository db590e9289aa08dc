"""The house rules: which package may import which, who may know the command line, what lies at the top."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
PACKAGES = ("brief", "anatomy", "sensing", "physics", "noise", "engine", "evidence", "outputs")
BASE = {"", "errors", "units"}  # "" is the package itself: its version
TOP = {
    "README.md",
    "DEVELOPERS.md",
    "pyproject.toml",
    "layout",
    "tests",
    "configs",
    "results",
    ".ci",
    ".gitignore",
    "LICENSE",
    "CHANGELOG.md",
}


def imported(path):
    """(module, whether at the top of the file or only for type checking) of every import in a file."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    lazy = {
        inner
        for node in ast.walk(tree)
        if isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef))
        or (isinstance(node, ast.If) and getattr(node.test, "id", "") == "TYPE_CHECKING")
        for inner in ast.walk(node)
    }
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            # `from layout.x import y` may bring in the module layout.x.y
            names = [f"{node.module}.{alias.name}" for alias in node.names]
        else:
            continue
        yield from ((name, node not in lazy) for name in names)


def parts_of_the_house(path):
    """The packages and modules directly under `layout` that a file imports."""
    found = set()
    for name, _ in imported(path):
        if name.split(".")[0] == "layout":
            part = [*name.split("."), ""][1]
            found.add("" if part.startswith("__") else part)
    return found


def files(package):
    return sorted((ROOT / "layout" / package).rglob("*.py"))


@pytest.mark.parametrize("package", PACKAGES)
def test_packages_import_only_what_stands_before_them(package):
    before = set(PACKAGES[: PACKAGES.index(package) + 1])
    assert files(package)
    for path in files(package):
        assert parts_of_the_house(path) <= before | BASE, path


def test_the_engine_knows_nothing_of_heads_and_sensors():
    for path in files("engine"):
        assert parts_of_the_house(path) <= {"engine", "errors"}, path


def test_base_modules_stand_alone():
    for name in ("__init__", "errors", "units"):
        assert not parts_of_the_house(ROOT / "layout" / f"{name}.py")


def test_the_house_has_no_other_rooms():
    inside = {path.stem if path.suffix == ".py" else path.name for path in (ROOT / "layout").iterdir()}
    assert inside - {"__pycache__"} == {*PACKAGES, "design", "cli", "errors", "units", "__init__", "__main__"}


def test_only_the_command_line_knows_click():
    for path in (ROOT / "layout").rglob("*.py"):
        knows = {name.split(".")[0] for name, _ in imported(path)} & {"click"}
        assert not knows or path.parent == ROOT / "layout" / "cli", path


@pytest.mark.parametrize("path", files("cli"), ids=lambda path: path.stem)
def test_the_command_line_is_a_thin_face(path):
    assert parts_of_the_house(path) <= {"cli", "design", "brief", "outputs"} | BASE
    at_once = {name for name, top in imported(path) if top}
    ours = {name for name in at_once if name.split(".")[0] == "layout"}
    standard = set(sys.stdlib_module_names)
    assert {name.split(".")[0] for name in at_once - ours} <= standard | {"click"}
    assert all(name.startswith(("layout.cli.", "layout.errors.")) or name == "layout.__version__" for name in ours)


def test_the_top_of_the_repository_is_tidy():
    if not (ROOT / ".git").exists():
        pytest.skip("not a git checkout")
    listed = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, check=True).stdout
    assert {line.split("/")[0] for line in listed.splitlines()} <= TOP
