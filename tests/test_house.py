"""Guards of the house: what stands where, who may import whom, what every module owes its reader.

The sources are read, not imported, so that a guard sees every line, also those of functions that
import late and of functions that a decorator replaces.
"""

import ast
import inspect
import itertools
import re
import subprocess
from collections.abc import Iterator
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = ROOT / "hmmseg"
MODULES = sorted(PACKAGE.rglob("*.py"))

ROOMS = [
    "errors",
    "outputs",
    "progress",
    "sequence",
    "model",
    "kernels",
    "simulate",
    "inference",
    "training",
    "regions",
    "evidence",
    "tracks",
    "provenance",
    "report",
    "jobs",
    "cli",
    "__main__",
]
"""In the order in which data flows; a room imports only rooms above it."""

TOP_LEVEL = {
    "README.md",
    "DEVELOPERS.md",
    "pyproject.toml",
    "LICENSE",
    "Snakefile",
    "workflow",
    "hmmseg",
    "config",
    "tests",
    "demo_data",
}

LONGEST_MODULE = 400
MOST_PARAMETERS_IN_A_SENTENCE = 3
"""So many can be explained in prose; more need a section that names each."""

FOLDERS_OF_MACHINES = ("home", "work", "tmp", "root", "Users", "mnt", "scratch")

Function = ast.FunctionDef | ast.AsyncFunctionDef


def _name(module: Path) -> str:
    return module.relative_to(ROOT).as_posix()


def _tree(module: Path) -> ast.Module:
    return ast.parse(module.read_text(encoding="utf-8"), filename=str(module))


def _room(module: Path) -> str:
    return module.relative_to(PACKAGE).with_suffix("").parts[0]


def _imported(module: Path) -> Iterator[tuple[int, str]]:
    """Return line and dotted name of everything that a module imports, wherever it does."""
    package = module.relative_to(ROOT).with_suffix("").parts[:-1]
    for node in ast.walk(_tree(module)):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield node.lineno, alias.name
        elif isinstance(node, ast.ImportFrom):
            stem = ".".join(package[: len(package) + 1 - node.level]) if node.level else ""
            base = ".".join(part for part in (stem, node.module) if part)
            for alias in node.names:
                yield node.lineno, f"{base}.{alias.name}"


def _exported(tree: ast.Module) -> list[str] | None:
    for node in tree.body:
        if isinstance(node, ast.Assign) and any(
            isinstance(target, ast.Name) and target.id == "__all__" for target in node.targets
        ):
            names = ast.literal_eval(node.value)
            return [str(name) for name in names]
    return None


def _committed() -> list[str]:
    try:
        listing = subprocess.run(
            ["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, check=True, text=True
        )
    except (OSError, subprocess.CalledProcessError):
        pytest.skip("not a git working tree")
    return [name for name in listing.stdout.split("\0") if name]


# Where things stand


def test_top_level_holds_only_what_the_house_has() -> None:
    """A new name at the top is a new thing for everybody to wonder about."""
    tops = {name.split("/")[0] for name in _committed()}
    assert not {top for top in tops if not top.startswith(".")} - TOP_LEVEL


def test_no_file_names_a_folder_of_one_machine() -> None:
    """Absolute paths are true on one machine only."""
    folder = re.compile(rf"(?<![\w./~<>{{}}$-])/(?:{'|'.join(FOLDERS_OF_MACHINES)})/[\w.]")
    found = []
    for name in _committed():
        path = ROOT / name
        if not path.is_file():  # removed, and not committed yet
            continue
        try:
            text = path.read_text(encoding="utf-8")
        except UnicodeDecodeError:
            continue
        for number, line in enumerate(text.splitlines(), start=1):
            if folder.search(line):
                found.append(f"{name}:{number}: {line.strip()[:80]}")
    assert not found


@pytest.mark.parametrize("module", MODULES, ids=_name)
def test_module_can_be_read_in_one_sitting(module: Path) -> None:
    """A module beyond this length is two."""
    assert len(module.read_text(encoding="utf-8").splitlines()) <= LONGEST_MODULE


# Who may import whom


@pytest.mark.parametrize("module", MODULES, ids=_name)
def test_imports_go_one_way(module: Path) -> None:
    """A room imports only rooms above it in the list, and itself."""
    room = _room(module)
    if room == "__init__":
        allowed = set()
    else:
        assert room in ROOMS, f"{room} is not a room of the house"
        allowed = {*ROOMS[: ROOMS.index(room) + 1], "__version__"}
    for line, name in _imported(module):
        parts = name.split(".")
        if parts[0] == "hmmseg":
            target = parts[1] if len(parts) > 1 else "__version__"
            assert target in allowed, f"{_name(module)}:{line} imports {name}"


@pytest.mark.parametrize(
    "module", [module for module in MODULES if _room(module) == "kernels"], ids=_name
)
def test_kernels_know_only_arrays(module: Path) -> None:
    """Of other people's packages, kernels need NumPy and Numba."""
    outside = {"Bio", "click", "pandas", "snakemake", "tqdm", "yaml", "scipy"}
    assert not {name.split(".")[0] for _, name in _imported(module)} & outside


BEARS_RESULTS = {"model", "kernels", "inference", "training", "simulate"}
LINEAR_ALGEBRA = {"linalg", "dot", "vdot", "inner", "matmul", "tensordot", "einsum"}


@pytest.mark.parametrize(
    "module", [module for module in MODULES if _room(module) in BEARS_RESULTS], ids=_name
)
def test_no_linear_algebra_library_where_results_are_made(module: Path) -> None:
    """What BLAS and LAPACK return depends on the processor, and results must not."""
    found = []
    for node in ast.walk(_tree(module)):
        if isinstance(node, ast.BinOp | ast.AugAssign) and isinstance(node.op, ast.MatMult):
            found.append(f"line {node.lineno}: @")
        elif isinstance(node, ast.Attribute) and node.attr in LINEAR_ALGEBRA:
            found.append(f"line {node.lineno}: {node.attr}")
    assert not found


# What a module owes its reader


@pytest.mark.parametrize("module", MODULES, ids=_name)
def test_public_names_are_listed_and_defined(module: Path) -> None:
    """Every module says in ``__all__`` what it is for."""
    tree = _tree(module)
    assert ast.get_docstring(tree), f"{_name(module)} has no docstring"
    if module.stem in {"__init__", "__main__"} and _exported(tree) is None:
        assert not [n for n in tree.body if isinstance(n, Function | ast.ClassDef)]
        return
    exported = _exported(tree)
    assert exported is not None, f"{_name(module)} has no __all__"
    assert len(exported) == len(set(exported))
    defined: set[str] = set()
    for node in tree.body:
        if isinstance(node, Function | ast.ClassDef):
            defined.add(node.name)
        elif isinstance(node, ast.Import | ast.ImportFrom):
            defined |= {alias.asname or alias.name for alias in node.names}
        elif isinstance(node, ast.Assign | ast.AnnAssign):
            targets = node.targets if isinstance(node, ast.Assign) else [node.target]
            defined |= {
                leaf.id
                for target in targets
                for leaf in ast.walk(target)
                if isinstance(leaf, ast.Name)
            }
    assert not set(exported) - defined


def _public(tree: ast.Module) -> Iterator[tuple[str, Function | ast.ClassDef]]:
    """Return the exported functions and classes, and the public methods of those classes."""
    exported = _exported(tree) or []
    for node in tree.body:
        if isinstance(node, Function | ast.ClassDef) and node.name in exported:
            yield node.name, node
            if isinstance(node, ast.ClassDef):
                for inner in node.body:
                    if isinstance(inner, Function) and not inner.name.startswith("_"):
                        yield f"{node.name}.{inner.name}", inner


def _sections(docstring: str) -> dict[str, list[str]]:
    """Return the lines of each section of a NumPy docstring, by title."""
    lines = docstring.splitlines()
    starts = [
        number
        for number, (title, rule) in enumerate(itertools.pairwise(lines))
        if title.strip() and re.fullmatch(r"-{3,}", rule.strip())
    ]
    spans = itertools.pairwise([*starts, len(lines)])
    return {lines[start].strip(): lines[start + 2 : end] for start, end in spans}


def _documented(lines: list[str]) -> list[str]:
    """Return the names that a Parameters or Attributes section describes."""
    names = []
    for line in lines:
        if line.strip() and not line.startswith(" "):
            heads = line.split(" : ")[0].rstrip(":")
            names += [head.strip().lstrip("*") for head in heads.split(",")]
    return names


def _parameters(function: Function) -> list[str]:
    spec = function.args
    named = [*spec.posonlyargs, *spec.args]
    if spec.vararg:
        named.append(spec.vararg)
    named += spec.kwonlyargs
    if spec.kwarg:
        named.append(spec.kwarg)
    names = [argument.arg for argument in named if argument.arg not in {"self", "cls"}]
    # The first parameter of a Numba intrinsic is the compiler's own; callers never pass it.
    compiled = any("intrinsic" in ast.unparse(d) for d in function.decorator_list)
    return names[1:] if compiled else names


def _fields(node: ast.ClassDef) -> list[str]:
    """Return what a class is built from: the arguments of __init__, or its annotated fields."""
    for inner in node.body:
        if isinstance(inner, Function) and inner.name == "__init__":
            return _parameters(inner)
    return [
        inner.target.id
        for inner in node.body
        if isinstance(inner, ast.AnnAssign) and isinstance(inner.target, ast.Name)
    ]


def _is_command(node: Function | ast.ClassDef) -> bool:
    """Tell whether click made it a command, whose docstring is its help."""
    return any(
        "command" in ast.unparse(d) or "group" in ast.unparse(d) for d in node.decorator_list
    )


PUBLIC = [
    pytest.param(node, id=f"{_name(module)}::{name}")
    for module in MODULES
    for name, node in _public(_tree(module))
]


@pytest.mark.parametrize("node", PUBLIC)
def test_docstring_matches_signature(node: Function | ast.ClassDef) -> None:
    """Public names are explained, and their parameters by the names they have, in order."""
    raw = ast.get_docstring(node, clean=False)
    assert raw, "no docstring"
    sections = _sections(inspect.cleandoc(raw))
    if isinstance(node, ast.ClassDef):
        known = _fields(node)
        for title in ("Parameters", "Attributes"):
            described = _documented(sections.get(title, []))
            if title == "Parameters" and described:
                assert described == known
            # A field that a docstring does not name is one that nobody can know.
            if title == "Attributes" and described and "Parameters" not in sections:
                assert not set(known) - set(described)
        return
    if _is_command(node):
        return
    expected = _parameters(node)
    if "Parameters" not in sections and len(expected) <= MOST_PARAMETERS_IN_A_SENTENCE:
        return
    assert _documented(sections.get("Parameters", [])) == expected


def test_guard_reads_docstrings() -> None:
    """The guard above would mean nothing if it found no parameters anywhere."""
    documented = [
        node
        for (node,) in (param.values for param in PUBLIC)
        if isinstance(node, Function) and _parameters(node)
    ]
    assert documented
    text = (
        "Sum.\n\nParameters\n----------\na, b : int\n    Two.\n*rest : int\n\nReturns\n-------\nint"
    )
    assert _documented(_sections(text)["Parameters"]) == ["a", "b", "rest"]
