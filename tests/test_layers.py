"""House rules that a reader can rely on: who may import whom, and that names and docs exist."""

from __future__ import annotations

import ast
import re
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "tagstream"
STAGES = ["feeds", "conditioning", "tallies", "estimates", "outputs"]
SHARED = {
    "_version",
    "block",
    "compiled",
    "counters",
    "errors",
    "marks",
    "recording",
    "security",
    "settings",
    "simulation",
    "units",
}
# Kernels that tests reach through the class that owns their state, and their twin there.
THROUGH_THEIR_CLASS = {
    "later": "naive.judged",
    "fill_plain": "naive.judged",
    "fill_together": "naive.judged",
    "fill_judged": "naive.judged",
    "fill_survivors": "naive.without_dead_time",
    "fill_pairs_singly": "fill_pairs",
    "fill_close_pairs": "add_sparse",
}
MODULES = sorted(PACKAGE.rglob("*.py"))


def imports(path: Path) -> set[str]:
    """Modules of the package that a file imports, wherever in it, without `tagstream.`."""
    found = set()
    for node in ast.walk(ast.parse(path.read_text())):
        if isinstance(node, ast.ImportFrom) and node.module:
            found |= {node.module} | {f"{node.module}.{name.name}" for name in node.names}
        elif isinstance(node, ast.Import):
            found |= {name.name for name in node.names}
    existing = {
        m
        for m in found
        if (PACKAGE.parent / m.replace(".", "/")).is_dir()
        or (PACKAGE.parent / (m.replace(".", "/") + ".py")).exists()
    }
    return {m.removeprefix("tagstream.") for m in existing if m.startswith("tagstream.")}


def home(path: Path) -> str:
    """The stage or shared module that a file belongs to."""
    return path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def named(path: Path) -> str:
    return str(path.relative_to(PACKAGE))


@pytest.mark.parametrize("path", [p for p in MODULES if home(p) in STAGES], ids=named)
def test_a_stage_knows_shared_modules_itself_and_the_records_of_the_stage_before(
    path: Path,
) -> None:
    stage = home(path)
    before = STAGES[STAGES.index(stage) - 1] if stage != STAGES[0] else None
    for module in imports(path):
        top = module.split(".")[0]
        allowed = top in SHARED or top == stage or module == before
        assert allowed, f"{named(path)} imports {module}"


@pytest.mark.parametrize("path", [p for p in MODULES if home(p) in SHARED], ids=named)
def test_shared_modules_know_no_stage(path: Path) -> None:
    assert not {m for m in imports(path) if m.split(".")[0] not in SHARED}


def test_the_pipeline_alone_knows_all_stages() -> None:
    knows_all = {named(p) for p in MODULES if set(STAGES) <= {m.split(".")[0] for m in imports(p)}}
    assert knows_all == {"pipeline.py"}


@pytest.mark.parametrize("path", [p for p in MODULES if p.name == "kernels.py"], ids=named)
def test_kernels_see_arrays_and_integers_only(path: Path) -> None:
    assert imports(path) == {"compiled"}


@pytest.mark.parametrize("path", [p for p in MODULES if p.name == "kernels.py"], ids=named)
def test_every_kernel_is_used_by_a_test(path: Path) -> None:
    tests = "".join(p.read_text() for p in Path(__file__).parent.rglob("test_*.py"))
    for node in ast.parse(path.read_text()).body:
        if isinstance(node, ast.FunctionDef) and not node.name.startswith("_"):
            name = THROUGH_THEIR_CLASS.get(node.name, node.name)
            assert re.search(rf"\b{name}\b", tests), f"{node.name} has no test of its own"


@pytest.mark.parametrize("path", MODULES, ids=named)
def test_public_things_say_what_they_are(path: Path) -> None:
    tree = ast.parse(path.read_text())
    assert ast.get_docstring(tree), "module"
    for node in tree.body:
        if isinstance(node, ast.ClassDef | ast.FunctionDef) and not node.name.startswith("_"):
            assert ast.get_docstring(node), node.name


@pytest.mark.parametrize("path", MODULES, ids=named)
def test_modules_have_telling_names_and_a_readable_size(path: Path) -> None:
    assert path.stem not in {"utils", "helpers", "common", "core", "misc", "manager"}
    assert len(path.read_text().splitlines()) <= 400


def test_no_test_name_is_given_twice() -> None:
    for path in Path(__file__).parent.rglob("test_*.py"):
        names = [n.name for n in ast.parse(path.read_text()).body if isinstance(n, ast.FunctionDef)]
        assert len(names) == len(set(names)), path
