"""The direction of imports, the tables of plug-ins and the docstrings, checked from the source files.

Changing who may import whom means changing the tables below, where a reader sees it.
"""

import ast
import re
import subprocess
import sys
from importlib import import_module
from pathlib import Path

import pytest

import leanloop
from leanloop.equilibrium import MODELS
from leanloop.recycle import METHODS
from leanloop.registry import BrokenPlugin, Registry
from leanloop.units import KINDS

ROOT = Path(leanloop.__file__).parent
FILES = sorted(ROOT.rglob("*.py"))

# Layer (a top-level file or folder of the package): the layers it may import; itself always.
TEXT = ("errors", "quantities", "entries")
LAYERS = {
    "errors": (),
    "status": (),
    "version": (),
    "quantities": (),
    "registry": ("errors",),
    "entries": ("errors", "quantities"),
    "components": TEXT,
    "enthalpy": (*TEXT, "components"),
    "stream": ("quantities", "components"),
    "equilibrium": (*TEXT, "registry", "components"),
    "hydraulics": ("errors",),
    "column": ("errors", "status", "entries", "equilibrium"),
    "flash": ("errors", "status", "entries", "components", "stream", "equilibrium", "enthalpy", "column"),
    "feed": (*TEXT, "components", "stream", "equilibrium", "flash"),
    "units": (*TEXT, "status", "registry", "components", "stream", "equilibrium", "enthalpy", "column", "flash"),
    "recycle": ("errors", "registry", "entries"),
    "flowsheet": (
        *TEXT, "status", "registry", "components", "stream", "equilibrium", "enthalpy", "column", "flash", "units", "feed",
        "recycle",
    ),
    "pinch": (*TEXT, "status", "components", "stream", "equilibrium", "units", "flowsheet"),
    "studies": (*TEXT, "status", "version", "components", "stream", "feed", "units", "flowsheet"),
    "sizing": (*TEXT, "status", "components", "stream", "hydraulics", "flowsheet", "pinch", "studies"),
    "pictures": ("errors", "units", "flowsheet", "pinch", "studies", "sizing"),
    "output": (
        *TEXT, "status", "version", "registry", "components", "stream", "equilibrium", "units", "recycle", "flowsheet", "pinch",
        "hydraulics", "studies", "sizing",
    ),
    "textfile": (*TEXT, "components", "feed", "flowsheet", "studies", "sizing"),
    "checks": (
        *TEXT, "status", "registry", "components", "stream", "equilibrium", "enthalpy", "units", "recycle",
    ),
    "cli": (*TEXT, "output", "pictures", "flowsheet", "studies", "sizing", "textfile", "package"),
    "__main__": ("cli",),
    # leanloop/__init__.py
    "package": (*TEXT, "version", "components", "stream", "feed", "flowsheet", "pinch", "studies", "sizing", "textfile"),
}
ORDER = (
    "errors", "status", "version", "registry", "quantities", "entries", "components", "enthalpy", "stream", "equilibrium",
    "hydraulics", "column", "flash", "feed", "units", "recycle", "checks", "flowsheet", "pinch", "studies", "sizing", "output",
    "pictures", "textfile", "package", "cli", "__main__",
)

# Third-party packages, and the files or folders that may import them; "" is the whole package.
OUTSIDE = {
    "numpy": ("",),
    "scipy": ("",),
    "networkx": ("flowsheet/graph.py", "flowsheet/tearing.py"),
    "matplotlib": ("pictures/",),
    "distributed": ("studies/executors.py",),
}
STANDARD_ONLY_IN = {
    "argparse": ("cli.py",),
    "tomllib": ("textfile/",),
    "sqlite3": ("studies/store.py",),
    "pickle": ("studies/tasks.py",),
}
NOT_IN = {("scipy", "recycle/"), ("scipy", "textfile/"), ("scipy", "cli.py"), ("numpy", "cli.py"), ("numpy", "quantities.py")}

# Plug-in files are loaded by name alone. What a layer shares is in the files listed here.
SHARED = {
    "equilibrium": ("", ".base", ".conditions", ".water"),
    "units": ("", ".base"),
    "recycle": ("", ".base", ".driver", ".linear"),
}
# Single exceptions: (file, module, name), each with its reason. One that is no longer used fails.
EXCEPTIONS = {
    ("flowsheet/result.py", "leanloop.output.text", "report"): "print(result), imported only when it is called",
    ("studies/findings.py", "leanloop.output.text", "findings"): "print(findings), imported only when it is called",
    ("sizing/designs.py", "leanloop.output.text", "designs"): "print(designs), imported only when it is called",
}


def layer_of(module):
    """The layer of a leanloop module, by its dotted name."""
    parts = module.split(".")
    return parts[1] if len(parts) > 1 else "package"


def imports(source):
    """(line, module, name, inside a function) of every import, those under TYPE_CHECKING left out."""
    found = []

    def visit(node, inside):
        if isinstance(node, ast.If) and isinstance(node.test, ast.Name) and node.test.id == "TYPE_CHECKING":
            for item in node.orelse:
                visit(item, inside)
            return
        if isinstance(node, ast.Import):
            found.extend((node.lineno, item.name, None, inside) for item in node.names)
        elif isinstance(node, ast.ImportFrom):
            module = "." * node.level + (node.module or "")
            found.extend((node.lineno, module, item.name, inside) for item in node.names)
        for child in ast.iter_child_nodes(node):
            visit(child, inside or isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef)))

    visit(ast.parse(source), False)
    return found


def known_modules():
    names = set()
    for path in FILES:
        parts = ("leanloop", *path.relative_to(ROOT).with_suffix("").parts)
        names.add(".".join(part for part in parts if part != "__init__"))
    return names


MODULES = known_modules()


def breaches(source, file, used=None):
    """Sentences, with file and line, on every import in a source that the tables do not allow."""
    own = file.split("/")[0].removesuffix(".py")
    own = "package" if own == "__init__" else own
    if own not in LAYERS:
        return [f"{file}:1: '{own}' is in no layer; give it one"]
    found = []
    for line, module, name, _ in imports(source):
        where = f"{file}:{line}: "
        top = module.split(".")[0]
        if module.startswith("."):
            found.append(f"{where}relative import of {module}; write the whole name")
        elif top == "leanloop":
            if f"{module}.{name}" in MODULES:  # from leanloop.equilibrium import points
                module, name = f"{module}.{name}", None
            if (file, module, name) in EXCEPTIONS:
                if used is not None:
                    used.add((file, module, name))
                continue
            layer = layer_of(module)
            if layer not in (own, *LAYERS[own]):
                found.append(f"{where}{own} imports {module} of layer {layer}")
            elif layer != own and layer in SHARED and module not in [f"leanloop.{layer}{end}" for end in SHARED[layer]]:
                found.append(f"{where}{module} is a plug-in; ask its registry")
        elif top in STANDARD_ONLY_IN:
            if not file.startswith(STANDARD_ONLY_IN[top]):
                found.append(f"{where}{top} is for {', '.join(STANDARD_ONLY_IN[top])} alone")
        elif top not in sys.stdlib_module_names:
            if top not in OUTSIDE:
                found.append(f"{where}{top} is no package that leanloop needs")
            elif not file.startswith(OUTSIDE[top]) or any(file.startswith(part) for lib, part in NOT_IN if lib == top):
                found.append(f"{where}{top} has no place here")
    return found


def relative(path):
    return path.relative_to(ROOT).as_posix()


class TestImports:
    @pytest.mark.parametrize("path", FILES, ids=relative)
    def test_only_what_the_table_allows(self, path):
        assert breaches(path.read_text(encoding="utf-8"), relative(path)) == []

    def test_every_exception_is_still_needed(self):
        used = set()
        for path in FILES:
            breaches(path.read_text(encoding="utf-8"), relative(path), used)
        assert used == set(EXCEPTIONS)

    def test_an_exception_upwards_is_imported_only_when_called(self):
        for file, module, name in EXCEPTIONS:
            lazy = {inside for _, own, item, inside in imports((ROOT / file).read_text(encoding="utf-8"))
                    if (own, item) == (module, name)}
            upwards = ORDER.index(layer_of(module)) > ORDER.index(file.split("/")[0])
            assert lazy == {True} or not upwards, file

    def test_the_table_points_downwards(self):
        assert sorted(ORDER) == sorted(LAYERS)
        for layer, below in LAYERS.items():
            assert all(ORDER.index(item) < ORDER.index(layer) for item in below), layer

    def test_every_layer_exists(self):
        names = {relative(path).split("/")[0].removesuffix(".py") for path in FILES}
        assert names - {"__init__"} | {"package"} == set(LAYERS)

    def test_nothing_imports_the_command_line(self):
        takers = [layer for layer, below in LAYERS.items() if "cli" in below]
        assert takers == ["__main__"]  # which is the command line itself

    @pytest.mark.parametrize(("file", "line", "source", "part"), [
        ("stream.py", 2, "import numpy as np\nfrom leanloop.units.base import Unit\n", "stream imports leanloop.units.base"),
        ("column/band.py", 1, "from leanloop.flowsheet.run import Run\n", "column imports leanloop.flowsheet.run"),
        ("column/law.py", 3, "\n\nfrom leanloop.equilibrium.constant import Constant\n", "is a plug-in"),
        ("column/law.py", 1, "from leanloop.equilibrium import constant\n", "is a plug-in"),
        ("flowsheet/sheet.py", 2, "import os\nfrom leanloop.units.mixer import Mixer\n", "is a plug-in"),
        ("flowsheet/sheet.py", 1, "from leanloop.recycle.newton import Newton\n", "is a plug-in"),
        ("flowsheet/plan.py", 2, "def late():\n    import networkx\n", "networkx has no place here"),
        ("flowsheet/graph.py", 1, "import leanloop.cli\n", "flowsheet imports leanloop.cli"),
        ("recycle/driver.py", 1, "from leanloop.stream import Stream\n", "recycle imports leanloop.stream"),
        ("recycle/newton.py", 1, "import scipy.optimize\n", "scipy has no place here"),
        ("units/mixer.py", 1, "import argparse\n", "argparse is for cli.py alone"),
        ("output/text.py", 1, "import matplotlib.pyplot as plt\n", "matplotlib has no place here"),
        ("pictures/base.py", 1, "import seaborn\n", "seaborn is no package"),
        ("errors.py", 1, "from . import status\n", "relative import"),
        ("hidden.py", 1, "", "is in no layer"),
        ("registry.py", 2, "try:\n    from leanloop.entries import Entry\nfinally:\n    pass\n", "leanloop.entries"),
    ])  # fmt: skip
    def test_a_bad_import_is_caught_with_its_file_and_line(self, file, line, source, part):
        found = breaches(source, file)
        assert len(found) == 1
        assert found[0].startswith(f"{file}:{line}: ")
        assert part in found[0]

    def test_a_good_source_is_let_through(self):
        source = (
            "from typing import TYPE_CHECKING\nimport numpy as np\nfrom leanloop.units import KINDS\n"
            "from leanloop.units.base import Unit\nif TYPE_CHECKING:\n    from leanloop.cli import main\n"
        )
        assert breaches(source, "flowsheet/plan.py") == []


# --- plug-ins


TABLES = {"units": (KINDS, "kind"), "equilibrium": (MODELS, "name"), "recycle": (METHODS, "name")}


def listed(folder):
    """The table in a folder's __init__.py, as it is written: name to "module:Class"."""
    tree = ast.parse((ROOT / folder / "__init__.py").read_text(encoding="utf-8"))
    tables = [node for node in ast.walk(tree) if isinstance(node, ast.Dict)]
    assert len(tables) == 1
    return {key.value: value.value for key, value in zip(tables[0].keys, tables[0].values, strict=True)}


def words(path, attribute):
    """(class, word) of the classes in a file that give themselves a name for files."""
    found = []
    for node in ast.parse(path.read_text(encoding="utf-8")).body:
        for line in node.body if isinstance(node, ast.ClassDef) else ():
            targets = [t.id for t in line.targets if isinstance(t, ast.Name)] if isinstance(line, ast.Assign) else []
            if attribute in targets and isinstance(line.value, ast.Constant) and line.value.value:
                found.append((node.name, line.value.value))
    return found


def disagreements(folder, package, attribute, table):
    """Sentences on plug-in files without a line in the table, and on lines that do not fit their file."""
    found, files = [], {path.stem: path for path in sorted(folder.glob("*.py"))}
    for name, target in table.items():
        stem = name.replace("-", "_")
        if not target.startswith(f"{package}.{stem}:"):
            found.append(f"line '{name}' points to {target}, not to {package}.{stem}")
        elif stem not in files:
            found.append(f"line '{name}' has no file {stem}.py")
        elif (target.partition(":")[2], name) not in words(files[stem], attribute):
            found.append(f"{stem}.py has no {target.partition(':')[2]} with {attribute} = '{name}'")
    for stem, path in files.items():
        for own, word in words(path, attribute):
            if word not in table:
                found.append(f"{path.name}: {own} is in no table; add a line for '{word}'")
            elif table[word] != f"{package}.{stem}:{own}":
                # a second form of a plug-in, which the listed file hands over to
                main = files.get(word.replace("-", "_"))
                if main is None or f"{package}.{stem}" not in [m for _, m, *_ in imports(main.read_text(encoding="utf-8"))]:
                    found.append(f"{path.name}: {own} calls itself '{word}', which is {table[word]}")
    return found


class TestPlugins:
    @pytest.mark.parametrize(("registry", "attribute", "name"), [
        (registry, attribute, name) for registry, attribute in TABLES.values() for name in registry
    ], ids=lambda item: item if isinstance(item, str) else getattr(item, "sort", None))
    def test_each_one_loads_under_its_own_word(self, registry, attribute, name):
        found = registry.load(name)
        module, _, base = registry.base.partition(":")
        assert issubclass(found, getattr(import_module(module), base))
        assert getattr(found, attribute) == name

    @pytest.mark.parametrize("folder", TABLES)
    def test_files_and_lines_agree(self, folder):
        assert disagreements(ROOT / folder, f"leanloop.{folder}", TABLES[folder][1], listed(folder)) == []

    @pytest.mark.parametrize("folder", TABLES)
    def test_the_registry_knows_every_line(self, folder):
        assert set(listed(folder)) <= set(TABLES[folder][0].names())

    @pytest.mark.parametrize(("files", "table", "part"), [
        ({"valve.py": 'class Valve(Unit):\n    kind = "valve"\n'}, {}, "valve.py: Valve is in no table"),
        ({}, {"valve": "made.valve:Valve"}, "line 'valve' has no file valve.py"),
        ({"valve.py": 'class Valve(Unit):\n    kind = "tap"\n'}, {"valve": "made.valve:Valve"}, "with kind = 'valve'"),
        ({"valve.py": 'class Valve(Unit):\n    kind = "valve"\n'}, {"valve": "made.tap:Valve"}, "points to made.tap:Valve"),
        ({"valve.py": 'class Valve(Unit):\n    kind = "valve"\n', "tap.py": 'class Tap(Unit):\n    kind = "valve"\n'},
         {"valve": "made.valve:Valve"}, "tap.py: Tap calls itself 'valve'"),
    ])  # fmt: skip
    def test_a_file_without_its_line_is_named(self, tmp_path, files, table, part):
        for name, text in files.items():
            (tmp_path / name).write_text(text, encoding="utf-8")
        assert any(part in item for item in disagreements(tmp_path, "made", "kind", table))

    def test_a_misspelt_line_is_broken_and_says_so(self):
        registry = Registry("unit kind", "leanloop.units", {"mixer": "leanloop.units.mixer:Mixxer"}, KINDS.base)
        with pytest.raises(BrokenPlugin, match="mixer.*Mixxer"):
            registry.load("mixer")


# --- docstrings


def public(tree):
    """(line, name, docstring) of a module and of its public classes, functions and methods."""
    yield 1, "module", ast.get_docstring(tree)
    todo = [(node, "") for node in tree.body]
    while todo:
        node, head = todo.pop()
        if isinstance(node, (ast.FunctionDef, ast.ClassDef)) and not node.name.startswith("_"):
            yield node.lineno, head + node.name, ast.get_docstring(node)
            if isinstance(node, ast.ClassDef):
                todo += [(item, f"{node.name}.") for item in node.body]


def undocumented(source, file):
    found = []
    for line, name, text in public(ast.parse(source)):
        first = (text or "").split("\n")[0].strip()
        if not first:
            found.append(f"{file}:{line}: {name} has no docstring")
        elif not first.endswith(".") or re.search(r"[.!?] [A-Z]", first):
            found.append(f"{file}:{line}: the first line of {name} is not one sentence: {first}")
    return found


class TestDocstrings:
    @pytest.mark.parametrize("path", FILES, ids=relative)
    def test_everything_public_opens_with_one_sentence(self, path):
        assert undocumented(path.read_text(encoding="utf-8"), relative(path)) == []

    @pytest.mark.parametrize(("source", "part"), [
        ("x = 1\n", "a.py:1: module has no docstring"),
        ('"""One."""\ndef f():\n    pass\n', "a.py:2: f has no docstring"),
        ('"""One."""\nclass A:\n    """Two."""\n    def f(self):\n        """no end"""\n', "a.py:4: the first line of A.f"),
        ('"""One. Two."""\n', "a.py:1: the first line of module"),
    ])
    def test_what_is_missing_is_named(self, source, part):
        found = undocumented(source, "a.py")
        assert len(found) == 1
        assert found[0].startswith(part)


# --- what an import brings along


def loaded_by(code):
    """Names of the modules loaded in a fresh process after some code."""
    script = f"import sys\nsys.path.insert(0, {str(ROOT.parent)!r})\n{code}\nprint(*sys.modules)"
    done = subprocess.run([sys.executable, "-W", "error", "-c", script], capture_output=True, text=True, timeout=60, check=True)
    return set(done.stdout.split())


PLUGIN_FILES = {target.partition(":")[0] for folder in TABLES for target in listed(folder).values()}


class TestFreshProcess:
    def test_importing_brings_no_extra_and_no_plugin(self):
        loaded = loaded_by("import leanloop")
        assert "leanloop.flowsheet.sheet" in loaded
        assert not loaded & {"matplotlib", "dask", "distributed", "pandas", "pytest", "hypothesis"}
        assert loaded & PLUGIN_FILES == set()
        assert "leanloop.cli" not in loaded

    def test_naming_a_plugin_loads_it_alone(self):
        loaded = loaded_by(
            "import leanloop\n"
            "state = dict(phase='gas', temperature=300.0, pressure=1e5, flows={'air': 1.0})\n"
            "unit = dict(kind='mixer', takes=['a', 'b'], gives='c')\n"
            "leanloop.Flowsheet({'air': {}}, feeds={'a': state, 'b': state}, units={'join': unit}).solve()"
        )
        assert loaded & PLUGIN_FILES == {"leanloop.units.mixer", "leanloop.recycle.newton"}
