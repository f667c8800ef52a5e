"""The folders are the data flow, and imports go one way. Start-up stays light."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import shpb

PACKAGE = Path(shpb.__file__).parent
MODULES = sorted(path for path in PACKAGE.rglob("*.py"))

# What each folder may import, besides itself and the ground.
GROUND = {"errors", "quantity", "arrays", "version", "whole_file", "limits"}
ALLOWED: dict[str, set[str]] = {
    "errors": set(),
    "quantity": set(),
    "version": set(),
    "limits": set(),
    "arrays": set(),
    "whole_file": set(),
    "settings": set(),
    "rig": {"settings"},
    "record": {"rig"},
    "pulse": {"record", "rig", "settings"},
    "wave": {"pulse", "rig", "settings"},
    "response": {"wave", "pulse", "rig", "settings"},
    "trust": {"forward", "response", "wave", "pulse", "record", "rig", "settings"},
    "reduction": {"trust", "response", "wave", "pulse", "record", "rig", "settings"},
    "forward": {"wave", "rig", "settings"},
    "fitting": set(),
    "adjust": {"reduction", "response", "wave", "pulse", "record", "rig", "settings"},
    "calibrate": {"fitting", "trust", "wave", "pulse", "record", "rig", "settings"},
    "merge": {"fitting", "record", "response", "rig", "settings"},
    "store": {
        "fitting",
        "merge",
        "reduction",
        "trust",
        "response",
        "wave",
        "pulse",
        "record",
        "rig",
        "settings",
    },
    "watch": {
        "store",
        "reduction",
        "trust",
        "response",
        "pulse",
        "record",
        "rig",
        "settings",
    },
    "view": {
        "adjust",
        "watch",
        "calibrate",
        "fitting",
        "merge",
        "reduction",
        "trust",
        "response",
        "wave",
        "pulse",
        "record",
        "rig",
        "settings",
    },
    "demo": {"forward", "wave", "rig", "record", "settings"},
    "docs": {"response", "trust", "rig"},
    "cli": {
        "adjust",
        "calibrate",
        "demo",
        "view",
        "watch",
        "store",
        "merge",
        "reduction",
        "record",
        "rig",
        "settings",
    },
}


def part_of(name: str) -> str:
    """First part below the package of a dotted module name."""
    return name.split(".")[1] if "." in name else ""


def imports_of(path: Path) -> set[str]:
    """Parts of the package that a module imports, inside functions too."""
    found = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {part_of(alias.name) for alias in node.names if alias.name.split(".")[0] == "shpb"}
        elif isinstance(node, ast.ImportFrom) and node.module and node.module.split(".")[0] == "shpb":
            if node.module == "shpb":
                found |= {alias.name for alias in node.names}
            else:
                found.add(part_of(node.module))
    return found


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_go_one_way(path: Path) -> None:
    relative = path.relative_to(PACKAGE)
    part = relative.parts[0].removesuffix(".py")
    if part in ("__init__", "__main__"):
        return  # the public face and the entry point
    assert part in ALLOWED, f"{relative}: add the new folder to the table of what it may import"
    stray = imports_of(path) - ALLOWED[part] - GROUND - {part}
    assert not stray, f"{relative} imports {sorted(stray)}"


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_modules_can_be_read_in_one_sitting(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= 500


def libraries_of(path: Path) -> set[str]:
    tree = ast.parse(path.read_text(encoding="utf-8"))
    names = {alias.name for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names}
    names |= {node.module for node in ast.walk(tree) if isinstance(node, ast.ImportFrom) and node.module}
    return {name.split(".")[0] for name in names}


@pytest.mark.parametrize(
    ("library", "homes"),
    [("h5py", {"store", "record", "demo"}), ("matplotlib", {"view"}), ("rich", {"view", "cli"})],
)
def test_each_library_has_its_home(library: str, homes: set[str]) -> None:
    users = {p.relative_to(PACKAGE).parts[0] for p in MODULES if library in libraries_of(p)}
    assert users <= homes
    assert users


def modules_after(code: str) -> set[str]:
    """Modules loaded in a fresh process by ``code``."""
    script = f"{code}\nimport sys\nprint('\\n'.join(sys.modules), file=sys.stderr)"
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    return set(done.stderr.split())


def test_help_loads_no_numpy() -> None:
    code = "from shpb.cli.main import main\ntry:\n    main(['--help'])\nexcept SystemExit:\n    pass"
    heavy = {"numpy", "scipy", "h5py", "matplotlib", "rich"}
    assert not heavy & modules_after(code)


def test_import_loads_nothing_heavy() -> None:
    assert not {"scipy", "h5py", "matplotlib", "rich"} & modules_after("import shpb")


def test_reading_rig_and_sheet_loads_no_numpy() -> None:
    code = "import shpb.rig.rig_file, shpb.rig.sheet_file, shpb.rig.shot_list, shpb.rig.templates"
    assert "numpy" not in modules_after(code)


def test_reduce_without_a_figure_loads_only_what_it_needs(tmp_path: Path) -> None:
    subprocess.run(
        [sys.executable, "-m", "shpb", "demo", str(tmp_path / "d"), "--write-only"],
        check=True,
        capture_output=True,
    )
    sheet = tmp_path / "d" / "records" / "W-02.toml"
    code = f"from shpb.cli.main import main\nmain(['reduce', {str(sheet)!r}, '--figure', 'none'])"
    loaded = modules_after(code)
    assert "shpb.store.shot_file" in loaded
    for name in ("matplotlib", "scipy", "scipy.signal", "scipy.stats", "scipy.interpolate", "rich"):
        assert name not in loaded, name


def test_public_names_are_all_there() -> None:
    for name in shpb.__all__:
        assert getattr(shpb, name) is not None
    assert set(shpb.__all__) <= set(dir(shpb))
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        shpb.nothing  # noqa: B018
