"""Who may import whom: read from the sources (function-local imports count) and seen in a fresh interpreter."""

from __future__ import annotations

import ast
import json
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent / "derive"

BELOW = {
    "formula": (),
    "exact": ("formula",),
    "problem": ("formula", "exact"),
    "record": ("formula", "problem"),
    "algebra": ("formula", "exact"),
    "numerics": ("formula", "problem"),
    "derivations": ("formula", "exact", "problem", "record", "algebra"),
    "checks": ("formula", "exact", "problem", "record", "numerics"),
    "report": ("formula", "problem", "record"),
    "judging": ("formula", "exact", "problem", "record", "algebra", "numerics", "derivations", "checks"),
}
BELOW["pipeline"] = (*BELOW["judging"], "judging")
_ALL = (*BELOW["pipeline"], "pipeline")
BELOW["worksheet"] = (*_ALL, "report")
BELOW["face"] = (*_ALL, "report", "worksheet")
BELOW["cli"] = (*_ALL, "report", "worksheet", "face")

THIRD_PARTY = {
    "formula": {"lark"},
    "exact": {"flint"},
    "problem": set(),
    "record": set(),
    "algebra": {"sympy", "flint"},
    "numerics": {"flint", "mpmath", "numpy"},
    "derivations": {"sympy"},
    "checks": {"flint"},
    "report": {"matplotlib"},
    "judging": set(),
    "pipeline": set(),
    "worksheet": {"tree_sitter", "tree_sitter_toml", "sympy", "numpy", "networkx"},
    "face": {"sympy", "numpy", "networkx"},
    "cli": {"click"},
}
ONE_OFF = {"derive/report/make_font.py"}  # makes package data; never imported, its tools are no dependencies
HEAVY = {"sympy", "mpmath", "numpy", "matplotlib", "networkx", "scipy", "pydantic", "click"}


def _sources() -> list[tuple[str, Path]]:
    """(layer, file) for every source; errors and the package's own face on the outside belong to no layer."""
    found = []
    for path in sorted(ROOT.rglob("*.py")):
        parts = path.relative_to(ROOT).parts
        layer = parts[0].removesuffix(".py")
        if layer not in ("errors", "__init__") and str(path.relative_to(ROOT.parent)) not in ONE_OFF:
            found.append((layer, path))
    return found


def _imports(path: Path) -> set[str]:
    """Every module named in an import statement anywhere in the file."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names.update(a.name for a in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path}: relative import"
            names.add(node.module or "")
            names.update(f"{node.module}.{a.name}" for a in node.names)
    return names


def test_every_layer_is_in_the_table() -> None:
    assert {layer for layer, _ in _sources()} == set(BELOW) == set(THIRD_PARTY)


@pytest.mark.parametrize("layer", BELOW)
def test_sources_import_only_what_lies_below(layer: str) -> None:
    allowed_own = {layer, *BELOW[layer], "errors"}
    for own, path in _sources():
        if own != layer:
            continue
        for name in _imports(path):
            head, *rest = name.split(".")
            if head == "derive":
                assert not rest or rest[0] in allowed_own | {"__version__", "face"} and (
                    rest[0] != "face" or layer in ("face", "cli")
                ), f"{path} imports {name}"
            elif head not in sys.stdlib_module_names:
                assert head in THIRD_PARTY[layer], f"{path} imports {name}"


def test_only_the_command_line_prints() -> None:
    for layer, path in _sources():
        calls = [n for n in ast.walk(ast.parse(path.read_text(encoding="utf-8"))) if isinstance(n, ast.Call)]
        names = {c.func.id for c in calls if isinstance(c.func, ast.Name)}
        assert layer == "cli" or "print" not in names, f"{path} prints"
        assert not names & {"eval", "exec", "compile", "__import__"}, f"{path} runs text"


def _loaded(layer: str) -> set[str]:
    """Top names of modules in memory after importing every module of the layer in a fresh interpreter."""
    modules = []
    for own, path in _sources():
        if own == layer:
            modules.append(".".join(path.relative_to(ROOT.parent).with_suffix("").parts).removesuffix(".__init__"))
    code = (
        "import sys, json, importlib\n"
        f"[importlib.import_module(m) for m in {modules!r}]\n"
        "print(json.dumps([m for m in sys.modules]))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT.parent)
    return set(json.loads(done.stdout))


def _reachable(layer: str) -> set[str]:
    """Third-party names that the layers below may bring along."""
    return THIRD_PARTY[layer].union(*(THIRD_PARTY[b] for b in BELOW[layer]))


@pytest.mark.parametrize("layer", BELOW)
def test_nothing_else_comes_along(layer: str) -> None:
    """Transitive imports: heavy third parties and upper layers must not be in memory."""
    loaded = _loaded(layer)
    tops = {m.split(".")[0] for m in loaded}
    # sympy, where a layer may use it, needs mpmath; matplotlib needs numpy
    allowed = _reachable(layer) | ({"mpmath"} if "sympy" in _reachable(layer) else set())
    allowed |= {"numpy"} if "matplotlib" in _reachable(layer) else set()
    assert not (tops & HEAVY) - allowed
    own = {m.split(".")[1] for m in loaded if m.startswith("derive.")}
    assert own <= {layer, *BELOW[layer], "errors"}


def test_the_two_roads_do_not_meet_below_the_pipeline() -> None:
    assert not {"algebra", "derivations"} & {m.split(".")[1] for m in _loaded("checks") if m.startswith("derive.")}


def test_the_reader_of_imports_sees_local_ones(tmp_path: Path) -> None:
    """The test is shown to fail: an import inside a function is found."""
    planted = tmp_path / "planted.py"
    planted.write_text("def f():\n    from derive.derivations import generator\n    import sympy\n")
    assert {"derive.derivations", "derive.derivations.generator", "sympy"} <= _imports(planted)
