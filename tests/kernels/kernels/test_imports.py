"""The kernels need numpy and the standard library, nothing else."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import sparkrank.kernels

FOLDER = Path(sparkrank.kernels.__file__).parent
MODULES = sorted(path.stem for path in FOLDER.glob("*.py"))
ALLOWED = {"numpy", *sys.stdlib_module_names}
# What arithmetic has no business with, though it is in the standard library.
REFUSED = {"os", "io", "pathlib", "tempfile", "shutil", "mmap", "pickle", "socket", "subprocess"}

IMPORT_ALL = """
import importlib, sys

class Refuse:
    def find_spec(self, name, path=None, target=None):
        top = name.partition(".")[0]
        if top not in sys.stdlib_module_names and top not in {"numpy", "sparkrank"}:
            raise ImportError(f"refused: {name}")

root, *modules = sys.argv[1:]
sys.meta_path.insert(0, Refuse())
sys.path.insert(0, root)
for refused in ("pyspark", "pyarrow"):
    try:
        importlib.import_module(refused)
    except ImportError:
        continue
    sys.exit(f"{refused} could be imported: the test proves nothing")
for module in modules:
    importlib.import_module(f"sparkrank.kernels.{module}")
print(*sorted(name for name in sys.modules if name.startswith("sparkrank.")))
"""


def test_they_import_where_only_numpy_is_installed() -> None:
    modules = [name for name in MODULES if name != "__init__"]
    assert {"lookup", "edges", "peel", "diagonals", "accumulate", "mass", "farms"} <= set(modules)
    command = [sys.executable, "-I", "-c", IMPORT_ALL, str(FOLDER.parent.parent), *modules]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    loaded = ["sparkrank.kernels", *(f"sparkrank.kernels.{name}" for name in modules)]
    assert done.stdout.split() == sorted(loaded)


@pytest.mark.parametrize("module", MODULES)
def test_nothing_else_is_imported(module: str) -> None:
    tree = ast.parse((FOLDER / f"{module}.py").read_text(encoding="utf-8"))
    names = [alias.name for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names]
    for node in ast.walk(tree):
        if isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are absolute"
            names.append(node.module or "")
    foreign = [name for name in names if not name.startswith("sparkrank.kernels.")]
    tops = {name.partition(".")[0] for name in foreign}
    assert tops <= ALLOWED - REFUSED
