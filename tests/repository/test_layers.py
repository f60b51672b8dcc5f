"""The repository keeps its own promises: one direction, light start-up, guides that tell the truth."""

from __future__ import annotations

import ast
import os
import re
import subprocess
import sys
from collections.abc import Iterator
from itertools import takewhile
from pathlib import Path

import pytest

TOP = Path(__file__).parents[2]
PACKAGE = TOP / "linter" / "samesum"
MODULES = sorted(PACKAGE.rglob("*.py"))

# From the first to the last: a room imports from itself and from rooms before it.
ORDER = [
    "spans", "problems", "shipped", "written", "reading", "settled", "graph", "evidence", "judging", "reviewing",
    "outputs",
]  # fmt: skip
LAST = ("examine", "editor", "cli", "__main__", "__init__")
HEAVY = ("lark", "z3", "pint", "networkx", "rich", "numpy", "yaml", "oxidd")


def imports(path: Path) -> Iterator[tuple[str, bool]]:
    """Every module of ours that a file imports, and whether at its top level."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    for node in ast.walk(tree):
        names = []
        if isinstance(node, ast.ImportFrom) and node.module:
            names = [node.module] + [f"{node.module}.{alias.name}" for alias in node.names]
        elif isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        for name in names:
            yield name, node in tree.body


def room_of(module: str) -> str:
    parts = module.split(".")
    return parts[1] if len(parts) > 1 else "__init__"


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_imports_go_one_way(path: Path) -> None:
    parts = path.relative_to(PACKAGE).with_suffix("").parts
    own = parts[0]
    if own in LAST:
        return
    assert own in ORDER, f"{own} is a room that the order does not know: put it in its place"
    for module, _ in imports(path):
        if module.startswith("samesum.") and (PACKAGE / Path(*module.split(".")[1:])).with_suffix(".py").exists():
            target = room_of(module)
            allowed = ORDER[: ORDER.index(own) + 1]
            assert target in allowed, f"{own} imports {module}: data flows the other way"


@pytest.mark.parametrize("path", MODULES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_modules_stay_readable(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    assert path.name == "__init__.py" or ast.get_docstring(ast.parse(text)), "say in a sentence what is in here"
    # The three words stand here because they may stand nowhere in the package.
    assert not re.search(r"\b(TODO|FIXME|XXX)\b", text)
    for handler in (node for node in ast.walk(ast.parse(text)) if isinstance(node, ast.ExceptHandler)):
        caught = ast.unparse(handler.type) if handler.type is not None else "everything"
        last = handler.body[-1]
        if not (isinstance(last, ast.Raise) and last.exc is None):  # cleaning up and raising it again is fine
            assert caught not in ("everything", "Exception", "BaseException"), f"line {handler.lineno} catches {caught}"


def imported_by(code: str) -> set[str]:
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)}
    report = f"import sys\ntry:\n    {code}\nexcept SystemExit:\n    pass\nprint(*sys.modules, file=sys.stderr)"
    done = subprocess.run([sys.executable, "-c", report], capture_output=True, text=True, env=environment, timeout=60)
    return {name.split(".")[0] for name in done.stderr.splitlines()[-1].split()}


@pytest.mark.parametrize("words", [["--help"], ["--version"], ["check", "--help"], ["count", "--help"], ["nonsense"]])
def test_what_needs_no_analysis_imports_none(words: list[str]) -> None:
    loaded = imported_by(f"from samesum.cli.main import main; main({words!r})")
    assert "samesum" in loaded
    assert loaded.isdisjoint(HEAVY)


def test_counting_does_not_import_what_it_does_not_use() -> None:
    path = TOP / "sample_rulebooks" / "marsh_example.rulebook"
    loaded = imported_by(f"from samesum.cli.main import main; main(['count', {str(path)!r}, '--json'])")
    assert loaded.isdisjoint({"numpy", "rich", "pint", "oxidd", "yaml"})


def test_importing_the_package_does_nothing() -> None:
    loaded = imported_by("import samesum")
    assert loaded.isdisjoint({*HEAVY, "argparse"})


def test_every_sample_is_named_in_its_readme() -> None:
    folder = TOP / "sample_rulebooks"
    readme = (folder / "README.md").read_text(encoding="utf-8")
    named = {name for name in re.findall(r"`([\w*.]+\.(?:rulebook|yaml))`", readme)}
    for path in sorted(folder.iterdir()):
        if path.suffix in (".rulebook", ".yaml"):
            assert any(path.match(pattern) for pattern in named), f"{path.name} stands in no line of the README"


def test_the_contributors_guide_knows_every_room() -> None:
    guide = (TOP / "DEVELOPERS.md").read_text(encoding="utf-8")
    for room in ("grammar/", "rules/", "sample_rulebooks/", "tests/", *(f"{name}" for name in ORDER)):
        assert room in guide, f"DEVELOPERS.md does not say what is in {room}"


@pytest.mark.parametrize("name", ["README.md", "DEVELOPERS.md"])
def test_links_lead_somewhere(name: str) -> None:
    text = (TOP / name).read_text(encoding="utf-8")
    for target in re.findall(r"\]\(([^)#]+)(?:#[^)]*)?\)", text):
        if "://" not in target:
            assert (TOP / target).exists(), f"{name} links to {target}, which is not there"


def test_the_readmes_output_is_a_real_one() -> None:
    """The output shown is what the command above it prints, line by line (``…`` stands for lines left out)."""
    text = (TOP / "README.md").read_text(encoding="utf-8")
    pieces = re.split(r"(?m)^    \$ samesum (.+)$", text)[1:]
    blocks = list(zip(pieces[::2], pieces[1::2], strict=True))
    assert blocks
    for words, shown in blocks:
        environment = {**os.environ, "PYTHONPATH": os.pathsep.join(sys.path), "COLUMNS": "80"}
        command = [sys.executable, "-m", "samesum", *words.split()]
        done = subprocess.run(command, capture_output=True, text=True, env=environment, cwd=TOP, timeout=120)
        printed = done.stdout.splitlines()
        at = 0
        lines = shown.strip("\n").splitlines()
        inside = list(takewhile(lambda line: not line or line.startswith("    "), lines))
        for line in (line.removeprefix("    ").rstrip() for line in inside):
            if line in ("…", ""):
                continue
            assert line in printed[at:], f"`samesum {words}` does not print this line of the README here: {line}"
            at = printed.index(line, at) + 1
        assert at > 5
