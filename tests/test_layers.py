"""Imports point down only; pure modules stay pure; no cycles; parts of one layer stay strangers."""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from tests.layers import LAYERS, PURE_UP_TO, STRANGERS

ROOT = Path(__file__).resolve().parent.parent

FORBIDDEN_IMPORTS = {
    "time", "random", "secrets", "socket", "selectors", "subprocess", "threading", "asyncio", "sqlite3",
    "sqlite_utils", "smtplib", "urllib", "http", "click", "os", "sys", "logging", "tempfile", "uuid",
    "multiprocessing", "pathlib", "shutil", "glob", "fcntl", "signal",
}  # fmt: skip
FORBIDDEN_CALLS = {"open", "print", "input", "default_rng", "RandomState", "now", "utcnow", "today", "getenv"}


def modules(root: Path) -> dict[str, Path]:
    found = {}
    for package in ("monitor", "storage", "demo"):
        for path in sorted((root / package).rglob("*.py")):
            name = ".".join(path.relative_to(root).with_suffix("").parts)
            found[name.removesuffix(".__init__")] = path
    return found


def layer_of(module: str) -> int:
    prefix = module
    while prefix not in LAYERS:
        prefix = prefix.rpartition(".")[0]
    return LAYERS[prefix]


def imported(tree: ast.AST, module: str, is_package: bool, known: set[str]) -> Iterator[tuple[str, int]]:
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield alias.name, node.lineno
        elif isinstance(node, ast.ImportFrom):
            base = module if is_package else module.rpartition(".")[0]
            for _ in range(node.level - 1):
                base = base.rpartition(".")[0]
            source = f"{base}.{node.module}" if node.level and node.module else (node.module or base)
            for alias in node.names:
                full = f"{source}.{alias.name}"
                yield (full if full in known else source), node.lineno


def part_of(module: str) -> str | None:
    return next((p for p in STRANGERS if module == p or module.startswith(p + ".")), None)


def findings(root: Path) -> list[str]:
    found = modules(root)
    graph: dict[str, set[str]] = {name: set() for name in found}
    bad = []
    for name, path in found.items():
        tree = ast.parse(path.read_text(encoding="utf-8"))
        layer = layer_of(name)
        for target, line in imported(tree, name, path.name == "__init__.py", set(found)):
            where = f"{path.relative_to(root)}:{line}"
            if target in found and target != name:
                graph[name].add(target)
                if layer_of(target) > layer:
                    bad.append(f"{where} upward: {name} (layer {layer}) imports {target} ({layer_of(target)})")
                if name.startswith("storage") and target.startswith("monitor"):
                    bad.append(f"{where} upward: storage imports monitor")
                ours, theirs = part_of(name), part_of(target)
                if ours and theirs and ours != theirs:
                    bad.append(f"{where} sideways: {name} imports {target}")
            elif target.split(".")[0] in FORBIDDEN_IMPORTS and layer <= PURE_UP_TO:
                bad.append(f"{where} impure: {name} imports {target}")
        if layer <= PURE_UP_TO:
            for node in ast.walk(tree):
                if isinstance(node, ast.Call):
                    callee = getattr(node.func, "id", getattr(node.func, "attr", ""))
                    if callee in FORBIDDEN_CALLS:
                        bad.append(f"{path.relative_to(root)}:{node.lineno} impure: {name} calls {callee}()")
    return bad + [f"cycle: {name} reaches itself" for name in found if name in reachable(graph, name)]


def reachable(graph: dict[str, set[str]], start: str) -> set[str]:
    seen: set[str] = set()
    stack = list(graph[start])
    while stack:
        name = stack.pop()
        if name not in seen:
            seen.add(name)
            stack.extend(graph[name])
    return seen


def test_imports_point_down_and_pure_modules_are_pure() -> None:
    assert findings(ROOT) == []


@pytest.mark.parametrize(
    ("module", "text", "complaint"),
    [
        ("monitor/tail/planted.py", "from monitor.engine import step", "upward"),
        ("storage/planted.py", "import monitor.errors", "upward"),
        ("monitor/tail/planted.py", "import monitor.parse.formats", "sideways"),
        ("monitor/watch/planted.py", "import time", "impure"),
        ("monitor/watch/planted.py", "import numpy\nr = numpy.random.default_rng()", "impure"),
        ("monitor/tail/planted.py", "import monitor.tail.planted2", "cycle"),
    ],
)
def test_a_planted_fault_is_found(tmp_path: Path, module: str, text: str, complaint: str) -> None:
    for stub in (
        "monitor/engine/step.py",
        "monitor/parse/formats.py",
        "monitor/errors.py",
        "monitor/engine/__init__.py",
    ):
        (tmp_path / stub).parent.mkdir(parents=True, exist_ok=True)
        (tmp_path / stub).write_text("")
    (tmp_path / module).parent.mkdir(parents=True, exist_ok=True)
    (tmp_path / module).write_text(text)
    (tmp_path / "monitor/tail").mkdir(exist_ok=True)
    (tmp_path / "monitor/tail/planted2.py").write_text("import monitor.tail.planted")
    (tmp_path / "demo").mkdir()
    assert any(complaint in line for line in findings(tmp_path))


def test_the_words_of_the_store_load_without_sqlite() -> None:
    code = "import sys, storage.facts, storage.grid, monitor.plan; print('sqlite3' in sys.modules)"
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT, check=True)
    assert out.stdout.strip() == "False"
