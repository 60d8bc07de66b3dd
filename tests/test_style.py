"""The numbers and the order that the code is held to, counted from syntax trees."""

import ast
import statistics
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parent.parent / "structmap"
MODULES = sorted(PACKAGE.rglob("*.py"))
ORDER = (
    *("version", "errors", "records", "files", "settings", "structure", "cell"),
    "plain_table",
    *("values", "sites", "contacts", "atom_pairs", "secondary", "chemistry"),
    *(
        "quotient",
        "weakest",
        "contact_list",
        "experiment",
        "behaviour",
        "motional_units",
    ),
    *("significance", "lattice", "one_process", "shifts", "network", "exposure"),
    *("holding", "result", "words", "tables", "forms", "page", "figures"),
    *("analysis", "batch", "cli"),
)
FUNCTIONS = (ast.FunctionDef, ast.AsyncFunctionDef)


def dotted(path: Path) -> str:
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    return ".".join(parts).removesuffix(".__init__")


TREES = {dotted(path): ast.parse(path.read_text(encoding="utf-8")) for path in MODULES}


def imported_at_run_time(tree: ast.Module) -> Iterator[str]:
    """Yield the modules that importing a module imports: not those inside functions."""
    waiting: list[ast.stmt] = list(tree.body)
    while waiting:
        node = waiting.pop()
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            # A name may be a module of the package that it is imported from.
            whole = [f"{node.module}.{alias.name}" for alias in node.names]
            yield from (name if name in TREES else node.module for name in whole)
        elif isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test):
            continue
        elif not isinstance(node, FUNCTIONS):
            waiting.extend(
                c for c in ast.iter_child_nodes(node) if isinstance(c, ast.stmt)
            )


IMPORTS = {
    name: sorted({i for i in imported_at_run_time(tree) if i.startswith("structmap")})
    for name, tree in TREES.items()
}


# --- order ----------------------------------------------------------------------------


@pytest.mark.parametrize("module", [name for name in IMPORTS if name != "structmap"])
def test_a_module_imports_only_what_stands_before_it(module):
    assert module.split(".")[1] in ORDER, "give the new module a place in ORDER"
    place = ORDER.index(module.split(".")[1])
    later = [
        name
        for name in IMPORTS[module]
        if name != "structmap" and name.split(".")[1] != ORDER[place]
        if ORDER.index(name.split(".")[1]) > place
    ]
    assert later == []


def test_no_module_imports_the_package_itself():
    assert {name: i for name, i in IMPORTS.items() if "structmap" in i} == {}


def test_imports_run_in_no_circle():
    state: dict[str, str] = {}

    def visit(name: str, path: tuple[str, ...]) -> None:
        assert state.get(name) != "open", f"circle: {' -> '.join((*path, name))}"
        if name not in state:
            state[name] = "open"
            for further in IMPORTS.get(name, []):
                # A folder's own names come from its parts, which do not import it.
                visit(further, (*path, name))
            state[name] = "done"

    for name in IMPORTS:
        visit(name, ())


@pytest.mark.parametrize("words", [["--help"], ["--version"], ["analyse", "--help"]])
def test_help_waits_for_no_heavy_library(words):
    heavy = ("gemmi", "matplotlib", "numpy", "pandas", "py3Dmol", "scipy", "sklearn")
    code = (
        "import sys\nfrom structmap.cli import main\n"
        f"try:\n    main({words!r})\nexcept SystemExit:\n    pass\n"
        f"print('loaded:', [name for name in {heavy!r} if name in sys.modules])\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=PACKAGE.parent,
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout.splitlines()[-1] == "loaded: []"


def test_importing_the_package_waits_for_no_heavy_library():
    code = (
        "import sys, structmap; print('pandas' in sys.modules, 'scipy' in sys.modules)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=PACKAGE.parent,
        capture_output=True,
        text=True,
        check=True,
    )
    assert done.stdout.split() == ["False", "False"]


# --- size -----------------------------------------------------------------------------


def functions_of(tree: ast.Module) -> Iterator[tuple[str, ast.FunctionDef]]:
    """Yield functions by dotted name; one inside another function begins with "_"."""
    waiting: list[tuple[str, ast.AST]] = [("", tree)]
    while waiting:
        prefix, node = waiting.pop()
        for child in ast.iter_child_nodes(node):
            named = isinstance(child, (*FUNCTIONS, ast.ClassDef))
            name = f"{prefix}{child.name}" if named else prefix.rstrip(".")
            if isinstance(child, FUNCTIONS):
                yield name, child
            hidden = "_" if isinstance(child, FUNCTIONS) else ""
            waiting.append((f"{name}.{hidden}" if name else "", child))


def code_lines(function: ast.FunctionDef) -> int:
    """Count the lines of code of a body, without docstring, comments and blanks."""
    body = function.body[1:] if ast.get_docstring(function) else function.body
    lines: set[int] = set()
    for node in (node for statement in body for node in ast.walk(statement)):
        if isinstance(node, ast.Constant) and "\n" in str(node.value):
            lines.update(range(node.lineno, node.end_lineno + 1))
        elif hasattr(node, "lineno"):
            lines.update((node.lineno, node.end_lineno))
    return len(lines)


BODIES = {
    f"{module}.{name}": code_lines(function)
    for module, tree in TREES.items()
    for name, function in functions_of(tree)
}


def test_no_module_is_longer_than_a_sitting():
    lengths = {
        dotted(p): len(p.read_text(encoding="utf-8").splitlines()) for p in MODULES
    }
    assert {name: n for name, n in lengths.items() if n > 500} == {}


def test_bodies_are_short():
    assert {name: n for name, n in BODIES.items() if n > 60} == {}
    assert statistics.median(BODIES.values()) <= 8
    assert statistics.quantiles(BODIES.values(), n=10)[-1] <= 25


def test_code_lines_counts_code_alone():
    source = 'def f():\n    """Doc."""\n\n    # why\n    a = [\n        1,\n    ]\n'
    assert code_lines(ast.parse(source).body[0]) == 3


# --- documentation and errors ---------------------------------------------------------


def is_public(dotted_name: str) -> bool:
    return not any(part.startswith("_") for part in dotted_name.split("."))


def test_everything_public_is_documented():
    bare = []
    for module, tree in TREES.items():
        if not ast.get_docstring(tree):
            bare.append(module)
        for name, function in functions_of(tree):
            if is_public(f"{module}.{name}") and not ast.get_docstring(function):
                bare.append(f"{module}.{name}")
        for node in ast.walk(tree):
            if isinstance(node, ast.ClassDef) and is_public(node.name):
                bare.extend(
                    [] if ast.get_docstring(node) else [f"{module}.{node.name}"]
                )
    assert bare == []


def raises_with_message() -> Iterator[tuple[str, bool]]:
    """Yield each `raise` that makes an error, and whether it hands over a value."""
    for module, tree in TREES.items():
        for node in ast.walk(tree):
            if isinstance(node, ast.Raise) and isinstance(node.exc, ast.Call):
                given = [*node.exc.args, *(k.value for k in node.exc.keywords)]
                has_value = any(not isinstance(value, ast.Constant) for value in given)
                yield f"{module}:{node.lineno}", has_value


def test_errors_say_what_was_found():
    found = list(raises_with_message())
    assert sum(has_value for _, has_value in found) >= 0.8 * len(found)


def test_everything_a_user_can_mend_is_one_tree():
    from structmap import errors  # noqa: PLC0415

    made = [v for v in vars(errors).values() if isinstance(v, type)]
    own = [v for v in made if v.__module__ == errors.__name__]
    assert len(own) > 3
    assert [v.__name__ for v in own if not issubclass(v, errors.StructmapError)] == []
    assert [v.__name__ for v in own if not v.__name__.endswith("Error")] == []
