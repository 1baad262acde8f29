"""Rules about the source itself: floors, the public face, docstrings, what is never called, sizes, the top level."""

from __future__ import annotations

import ast
import importlib
import inspect
import re
import subprocess
import sys
from functools import cache
from pathlib import Path

import pytest

import flatplan

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = ROOT / "flatplan"
FILES = sorted(PACKAGE.rglob("*.py"))
IDS = [str(path.relative_to(ROOT)) for path in FILES]

# A file may import from its own floor and from those below; the face (flatplan/__init__.py) from floor 0 only.
FLOORS = {
    "units": 0, "unit_text": 0, "records": 0, "channels": 0, "wiring": 0,
    "site": 1, "flat": 2, "numeric": 3, "decide": 4, "field": 5, "show": 6, "cli": 7, "__main__": 7,
}  # fmt: skip
ROOMS = ["site", "flat", "numeric", "decide", "field", "show", "cli"]

PUBLIC = [
    "ConfiningBed", "Face", "Fluid", "Limits", "Rock", "RockProfile", "Steps", "Target", "Well", "Zone", "assess", "closest", "confirm",
    "feedforward", "plot", "quickest", "radial", "report", "simulate", "slab", "spherical", "steps", "table", "zoned",
]  # fmt: skip


def module_name(path: Path) -> str:
    parts = path.relative_to(ROOT).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def room(module: str) -> str:
    """"flatplan.site.slab" → "site"; the package itself → ""."""
    return module.partition(".")[2].partition(".")[0]


@cache
def tree(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"), filename=str(path))


def imports(path: Path, top_only: bool = False) -> list[tuple[str, int]]:
    """(module, line) of every import, those inside functions and under TYPE_CHECKING included unless ``top_only``."""
    found = []
    modules = {module_name(p) for p in FILES}
    for node in tree(path).body if top_only else ast.walk(tree(path)):
        if isinstance(node, ast.Import):
            found += [(alias.name, node.lineno) for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                own = module_name(path).split(".")
                keep = len(own) - node.level + (path.name == "__init__.py")
                base = ".".join([*own[:keep], *([base] if base else [])])
            for alias in node.names:
                full = f"{base}.{alias.name}"
                found.append((full if full in modules else base, node.lineno))
    return found


def own_imports(path: Path, top_only: bool = False) -> list[tuple[str, int]]:
    return [(name, line) for name, line in imports(path, top_only) if name.partition(".")[0] == "flatplan"]


# --- floors ----------------------------------------------------------------------------------------


def test_every_file_has_a_floor():
    rooms = {room(module_name(path)) for path in FILES} - {""}
    assert rooms <= set(FLOORS)
    assert set(ROOMS) <= rooms


@pytest.mark.parametrize("path", FILES, ids=IDS)
def test_imports_look_down(path):
    here = room(module_name(path))
    for name, line in own_imports(path):
        there = room(name)
        if here == "":
            assert there == "" or FLOORS[there] == 0, f"line {line}: the face loads {name}; its rooms load when first used"
        else:
            # the package itself may be asked for its version only, which `import flatplan` has at once
            assert there == "" or FLOORS[there] <= FLOORS[here], f"line {line}: floor {FLOORS[here]} ({here}) imports {name}"
            assert there != "" or FLOORS[here] >= 6, f"line {line}: {here} imports the face"


@pytest.mark.parametrize("path", FILES, ids=IDS)
def test_imports_are_absolute_and_named(path):
    for node in ast.walk(tree(path)):
        if isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"line {node.lineno}: a relative import"
            assert all(alias.name != "*" for alias in node.names), f"line {node.lineno}: a star import"


def test_no_import_cycles():
    graph = {module_name(p): {name for name, _ in own_imports(p, top_only=True)} - {"flatplan", module_name(p)} for p in FILES}
    # importing flatplan.site.slab runs flatplan/site/__init__.py first, whose own imports are no cycle
    graph = {module: {name for name in names if not module.startswith(f"{name}.")} for module, names in graph.items()}
    done: set[str] = set()

    def visit(module: str, path: tuple[str, ...]) -> None:
        assert module not in path, " -> ".join([*path[path.index(module) :], module])
        if module not in done:
            for name in graph.get(module, ()):
                visit(name, (*path, module))
            done.add(module)

    for module in graph:
        visit(module, ())


def test_the_confirming_model_never_touches_the_series():
    """Agreement of plan and model is evidence only if neither is made from the other."""
    by_name = {module_name(p): p for p in FILES}
    seen: set[str] = set()
    todo = [name for name in by_name if room(name) == "numeric"]
    while todo:
        name = todo.pop()
        if name in seen or name not in by_name or name == "flatplan":
            continue
        seen.add(name)
        todo += [other for other, _ in own_imports(by_name[name])]
    assert not [name for name in seen if room(name) == "flat"]
    series = {"provider", "generating_function", "equilibrium", "stored_volume"}  # computed on floor 2
    for name in seen:
        if room(name) == "numeric":
            calls = [ast.unparse(node.func) for node in ast.walk(tree(by_name[name])) if isinstance(node, ast.Call)]
            asked = [call for call in calls if call.rpartition(".")[2] in series or call.endswith("medium.coefficients")]
            assert not asked, f"{name} asks the series by {asked}"


def test_simulating_loads_no_series():
    code = """
        import sys
        import flatplan as fp
        rock = fp.Rock(permeability="40 mD", porosity=0.12, compressibility="5e-10 1/Pa")
        medium = fp.slab(length="140 m", area="6000 m^2", rock=rock, fluid=fp.Fluid("0.5 cP", "4.5e-10 1/Pa"))
        fp.simulate(medium, fp.Steps(edges=["0 h", "12 h", "24 h"], rates=["1 L/s", "0 L/s"]), ["6 h", "30 h"])
        print([name for name in sys.modules if name.startswith("flatplan.flat")])
    """
    assert run(code) == "[]"


def run(code: str) -> str:
    """What a fresh interpreter prints for ``code``."""
    done = subprocess.run([sys.executable, "-c", inspect.cleandoc(code)], capture_output=True, text=True, timeout=120, cwd=ROOT)
    assert done.returncode == 0, done.stderr
    return done.stdout.strip()


# --- the face --------------------------------------------------------------------------------------


def test_the_face_is_a_list():
    assert flatplan.__all__ == PUBLIC
    assert dir(flatplan) == sorted([*PUBLIC, "__version__"])
    assert re.fullmatch(r"\d+\.\d+\.\d+", flatplan.__version__)
    with pytest.raises(AttributeError, match="^module 'flatplan' has no attribute 'plant'$"):
        _ = flatplan.plant


@pytest.mark.parametrize("name", PUBLIC)
def test_every_public_name_loads(name):
    value = getattr(flatplan, name)
    assert value.__name__ == name
    assert value.__module__.startswith("flatplan.")


def test_importing_the_package_loads_nothing_heavy():
    heavy = ["sympy", "pandas", "matplotlib", "pint", "scipy", "mpmath", "tqdm"]
    assert run(f"import sys, flatplan; print([name for name in {heavy} if name in sys.modules])") == "[]"
    assert run("import sys, flatplan; print([name for name in sys.modules if name.startswith('flatplan.')])") == "['flatplan.wiring']"


def test_plain_numbers_need_no_unit_package():
    code = 'import sys, flatplan as fp; fp.Rock(4e-14, 0.12, 5e-10); print("pint" in sys.modules)'
    assert run(code) == "False"


# --- docstrings ------------------------------------------------------------------------------------


def exported() -> list[tuple[str, str]]:
    """(module, name) of everything in the face and in the list of each room and of each module on floor 0."""
    found = [("flatplan", name) for name in PUBLIC]
    for path in FILES:
        module = module_name(path)
        if (path.name == "__init__.py" and module != "flatplan") or FLOORS.get(room(module)) == 0:
            for node in tree(path).body:
                if isinstance(node, ast.Assign) and any(isinstance(t, ast.Name) and t.id == "__all__" for t in node.targets):
                    found += [(module, ast.literal_eval(entry)) for entry in node.value.elts]
    return found


def sections(doc: str) -> dict[str, str]:
    """Sections of a numpydoc text: title → body."""
    parts = re.split(r"^([A-Z][A-Za-z ]+)\n-{3,}\s*$", inspect.cleandoc(doc), flags=re.MULTILINE)
    return {title: body for title, body in zip(parts[1::2], parts[2::2], strict=True)}


def arguments(call: object) -> list[str]:
    """Names of the arguments of a function (or constructor), without self."""
    return [name for name in inspect.signature(call).parameters if not name.startswith("_") and name not in ("self", "cls")]


def named(body: str) -> set[str]:
    """Argument names at the left margin of a section's body."""
    heads = [line.partition(":")[0] for line in body.splitlines() if line and not line.startswith(" ")]
    return {name.strip().lstrip("*") for head in heads for name in head.split(",")}


@pytest.mark.parametrize(("module", "name"), exported(), ids=[".".join(pair) for pair in exported()])
def test_public_names_are_documented(module, name):
    value = getattr(importlib.import_module(module), name)
    if not callable(value):
        return  # a table of constants; its comment stands beside it
    doc = value.__dict__.get("__doc__") if inspect.isclass(value) else value.__doc__
    assert doc and not doc.startswith(f"{name}("), "no docstring"  # dataclass writes its signature where there is none
    found = sections(doc)
    if inspect.isclass(value):
        if issubclass(value, Exception):
            return
        own_init = "__init__" in vars(value) and value.__init__.__code__.co_filename == inspect.getfile(value)  # not a dataclass's
        asked = arguments(value)
        told = named(found.get("Parameters", "")) | named(found.get("Attributes", ""))
        assert not asked or told, "neither Parameters nor Attributes"
        if own_init and module == "flatplan":
            assert "Raises" in found, "no Raises"
    else:
        asked = arguments(value)
        told = named(found.get("Parameters", ""))
        assert not asked or "Raises" in found or module != "flatplan", "no Raises"
        returns = inspect.signature(value).return_annotation
        assert returns in (None, "None") or "Returns" in found, "no Returns"
    missing = [argument for argument in asked if argument not in told]
    assert not missing, f"not described: {missing}"


@pytest.mark.parametrize(("module", "name"), exported(), ids=[".".join(pair) for pair in exported()])
def test_public_methods_are_documented(module, name):
    value = getattr(importlib.import_module(module), name)
    if inspect.isclass(value):
        for member, what in vars(value).items():
            function = what.fget if isinstance(what, property) else getattr(what, "func", what)  # cached_property has func
            function = function.__func__ if isinstance(function, (staticmethod, classmethod)) else function
            if not member.startswith("_") and inspect.isfunction(function):
                assert function.__doc__, f"{name}.{member} has no docstring"


@pytest.mark.parametrize("path", FILES, ids=IDS)
def test_every_module_says_what_it_is_for(path):
    assert ast.get_docstring(tree(path))


# --- what is never done ----------------------------------------------------------------------------

FORBIDDEN_CALLS = {"eval", "exec", "compile", "__import__", "sympify", "parse_expr", "S", "read_pickle", "to_pickle"}
FORBIDDEN_MODULES = {"pickle", "cPickle", "dill", "marshal", "shelve", "joblib", "subprocess", "ctypes", "socket", "urllib", "http"}


@pytest.mark.parametrize("path", FILES, ids=IDS)
def test_text_is_never_run(path):
    """No evaluation of text, no pickle, no other programs, no network; compiling a pattern (re.compile) is none of these."""
    for node in ast.walk(tree(path)):
        if isinstance(node, ast.Call):
            called = node.func.attr if isinstance(node.func, ast.Attribute) else getattr(node.func, "id", "")
            pattern = isinstance(node.func, ast.Attribute) and isinstance(node.func.value, ast.Name) and node.func.value.id == "re"
            assert called not in FORBIDDEN_CALLS or pattern, f"line {node.lineno}: {called}()"
            assert all(keyword.arg != "allow_pickle" for keyword in node.keywords), f"line {node.lineno}: allow_pickle"
    for name, line in imports(path):
        assert name.partition(".")[0] not in FORBIDDEN_MODULES, f"line {line}: {name}"


@pytest.mark.parametrize("path", FILES, ids=IDS)
def test_only_the_error_that_is_meant_is_caught(path):
    for node in ast.walk(tree(path)):
        if isinstance(node, ast.ExceptHandler):
            assert node.type is not None, f"line {node.lineno}: a bare except"
            caught = node.type.elts if isinstance(node.type, ast.Tuple) else [node.type]
            names = {getattr(entry, "id", getattr(entry, "attr", "")) for entry in caught}
            assert not names & {"Exception", "BaseException"}, f"line {node.lineno}: except {sorted(names)}"
        if isinstance(node, ast.Raise) and node.exc is not None:
            raised = node.exc.func if isinstance(node.exc, ast.Call) else node.exc
            assert getattr(raised, "id", "") not in ("Exception", "BaseException"), f"line {node.lineno}: raises a plain Exception"


@pytest.mark.parametrize("path", FILES, ids=IDS)
def test_nothing_is_left_unfinished(path):
    words = path.read_text(encoding="utf-8")
    assert not re.search(r"\b(TODO|FIXME|XXX|HACK|NotImplementedError|NotImplemented)\b", words)
    for node in ast.walk(tree(path)):
        left_out = isinstance(node, ast.Expr) and isinstance(node.value, ast.Constant) and node.value.value is ...
        assert not left_out, f"line {node.lineno}: a body left out"


@pytest.mark.parametrize("path", FILES, ids=IDS)
def test_files_and_functions_stay_short(path):
    assert len(path.read_text(encoding="utf-8").splitlines()) < 450
    for node in ast.walk(tree(path)):
        if isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef)):
            assert node.end_lineno - node.lineno < 100, f"{node.name} has {node.end_lineno - node.lineno + 1} lines"


# --- the repository --------------------------------------------------------------------------------

TOP = {"README.md", "DEVELOPERS.md", "pyproject.toml", "references.md", "flatplan", "notebooks", "tests"}
LEAKS = re.compile("|".join(["/root/", "/home/" + r"\w", "/Users/", r"/tmp/", r"[A-Z]:\\\\Users", "/work" + "/main"]))


@cache
def tracked() -> tuple[str, ...]:
    done = subprocess.run(["git", "ls-files", "-z"], capture_output=True, text=True, cwd=ROOT, check=False)
    return tuple(name for name in done.stdout.split("\0") if name) if done.returncode == 0 else ()


def test_the_top_level_is_the_agreed_one():
    if not tracked():
        pytest.skip("not a git checkout, or nothing tracked in it yet")
    top = {name.partition("/")[0] for name in tracked()}
    assert {name for name in top if not name.startswith(".")} == TOP


def test_no_file_names_a_folder_of_somebodys_machine():
    text_files = [name for name in tracked() if name.endswith((".py", ".md", ".toml", ".ipynb", ".html", ".csv")) or name == ".ci/run"]
    for name in text_files:
        path = ROOT / name
        if path != Path(__file__).resolve() and path.exists():
            found = LEAKS.search(path.read_text(encoding="utf-8"))
            assert not found, f"{name}: {found}"
