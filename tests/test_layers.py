"""Imports point downwards, heavy libraries stay in their rooms, and only files/ and bundled/ touch the disk."""

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "massfingerprint"
MODULES = sorted(PACKAGE.rglob("*.py"))

# A room may import from rooms of a lower floor, or from itself.
FLOORS = {
    "errors": 0,
    "constants": 0,
    "arguments": 1,
    "options": 2,
    "vocabulary": 1,
    "coverage": 1,
    "bundled": 2,
    "files": 2,
    "mass": 3,
    "sphere": 3,
    "earth": 4,
    "load": 4,
    "sealevel": 5,
    "coast": 6,
    "ensemble": 7,
    "study": 8,
    "figures": 3,
    "report": 9,
    "web": 9,
    "cli": 10,
}
ONLY_IN = {
    "matplotlib": {"figures"},
    "cartopy": {"figures"},
    "dask": {"ensemble"},
    "bokeh": {"web"},
    "panel": {"web"},
    "gsw": {"coast"},
    "click": {"cli"},
    "pint": {"vocabulary"},
    "cf_xarray": {"vocabulary"},
    "netCDF4": {"files", "bundled"},
    "pyogrio": {"files", "bundled"},
}
# Names that read or write files, as calls or attributes.
DISK = {
    "open",
    "read_text",
    "read_bytes",
    "write_text",
    "write_bytes",
    "open_dataset",
    "open_dataarray",
    "load_dataset",
}
DISK |= {
    "to_netcdf",
    "to_csv_file",
    "read_csv",
    "read_file",
    "to_file",
    "loadtxt",
    "savetxt",
    "genfromtxt",
    "save",
    "savez",
}
DISK |= {"read_parquet", "to_parquet", "read_excel", "fromfile", "tofile", "memmap", "read_json", "read_table_file"}


def room_of(path: Path) -> str:
    relative = path.relative_to(PACKAGE)
    return relative.parts[0] if len(relative.parts) > 1 else relative.stem


def imports_of(tree: ast.AST):
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((node.lineno, alias.name) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"line {node.lineno}: relative import"
            yield node.lineno, node.module
            if node.module == "massfingerprint":
                yield from ((node.lineno, f"massfingerprint.{alias.name}") for alias in node.names)


def faults(path: Path, text: str) -> list[str]:
    room, out = room_of(path), []
    for line, module in imports_of(ast.parse(text)):
        parts = module.split(".")
        if parts[0] in ONLY_IN and room not in ONLY_IN[parts[0]]:
            out.append(f"{path.name}:{line}: {parts[0]} belongs in {sorted(ONLY_IN[parts[0]])}")
        inside = parts[0] == "massfingerprint" and len(parts) > 1 and parts[1] not in ("__version__", room)
        if inside and FLOORS[parts[1]] >= FLOORS[room]:
            out.append(f"{path.name}:{line}: {room} must not import {parts[1]}")
    return out


def disk_contacts(path: Path, text: str) -> list[str]:
    if room_of(path) in ("files", "bundled"):
        return []
    out = []
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.Call):
            name = node.func.attr if isinstance(node.func, ast.Attribute) else getattr(node.func, "id", "")
            imported_here = isinstance(node.func, ast.Name) and name in ("write_text",)
            if name in DISK and not imported_here:
                out.append(f"{path.name}:{node.lineno}: {name} touches the disk outside files and bundled")
    return out


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_point_downwards_and_disk_is_left_alone(path):
    if path.name in ("__init__.py", "__main__.py") and path.parent == PACKAGE:
        return  # the table of contents names every room
    text = path.read_text(encoding="utf-8")
    assert faults(path, text) == []
    assert disk_contacts(path, text) == []


@pytest.mark.parametrize(
    ("where", "text", "expected"),
    [
        ("earth/love.py", "from massfingerprint.sealevel import solver", "must not import sealevel"),
        ("earth/love.py", "import matplotlib.pyplot", "matplotlib belongs in"),
        ("sphere/grids.py", "from massfingerprint import cli", "must not import cli"),
    ],
)
def test_a_wrong_import_is_noticed(where, text, expected):
    assert any(expected in fault for fault in faults(PACKAGE / where, text))


@pytest.mark.parametrize(
    "text", ["open('x')", "import xarray as xr\nxr.open_dataset('x')", "d.to_netcdf('x')", "p.write_text('x')"]
)
def test_a_disk_contact_is_noticed(text):
    assert disk_contacts(PACKAGE / "earth/love.py", text)
    assert not disk_contacts(PACKAGE / "files/netcdf.py", text)


def test_every_module_fits_its_size():
    long = {
        str(p.relative_to(PACKAGE)): n for p in MODULES if (n := len(p.read_text(encoding="utf-8").splitlines())) > 400
    }
    assert long == {}


def function_bodies(tree: ast.AST):
    for node in ast.walk(tree):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            body = node.body[1:] if ast.get_docstring(node) and len(node.body) > 1 else node.body
            yield node.name, body[-1].end_lineno - body[0].lineno + 1


def test_every_function_body_fits_its_size():
    long = [
        f"{path.name}:{name} {lines}"
        for path in MODULES
        for name, lines in function_bodies(ast.parse(path.read_text(encoding="utf-8")))
        if lines > 40
    ]
    assert long == []
