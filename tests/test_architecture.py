"""The arrows between modules are those of the tables in DEVELOPERS.md, and no others.

Source: the project's own architecture ("How the house is built"); nothing outside it says what may import what.
"""

import ast
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent

# Each module imports only from above and left of it; a line is one job. The modes in air need the air's mass: below it.
ENGINE = """
errors
air
fields
laws checks design
designfile
material
mesh
film
branch statics
radiation_tables radiation
rear
circuit source linear modes bands motion resonances
response window
cycle inverses harmonic balance distortion
compensation intermodulation distortion_view
blocks signals
limits
summary
""".split()

# What each part of the page may import, besides itself.
APP = {
    "__main__": {"server", "engine"},
    "server": {"main"},
    "main": {"pages", "session", "theme"},
    "pages": {"figures", "controls", "session", "harmonics", "listen"},
    "harmonics": {"session", "worker"},
    "figures": {"theme", "wire", "engine"},
    "listen": {"clips", "hearing", "renditions", "upload", "values", "worker"},
    "controls": {"state", "values", "wire"},
    "session": {"state", "worker"},
    "worker": {"engine"},
    "state": {"engine", "values"},
    "values": {"engine"},
    "theme": set(),
    "wire": set(),
    "renditions": {"clips", "hearing", "loudness", "theme", "wav"},
    "hearing": {"clips", "loudness", "engine"},
    "upload": {"wav"},
    "clips": {"wav"},
    "wav": set(),
    "loudness": set(),
}
ENGINE_FREE_OF = {"param", "panel", "bokeh", "panel_material_ui", "matplotlib", "app"}


def imports(path):
    """Dotted names a file imports, at any depth of the code: ("engine.design", "numpy", ...)."""
    names = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path.name}: a relative import"
            # "from engine import design" names a module, "from engine.design import Design" does not
            names |= {f"{node.module}.{alias.name}" for alias in node.names} if node.module in ("app", "engine") \
                else {node.module}
    return names


def engine_faults(name, imported):
    """Imports of an engine module that go against the order."""
    own = {dotted.split(".")[1] for dotted in imported if dotted.startswith("engine.")}
    allowed = set(ENGINE[:ENGINE.index(name)])
    return sorted((own - allowed) | {dotted for dotted in imported if dotted.split(".")[0] in ENGINE_FREE_OF})


def app_faults(part, imported):
    """Imports of a part of the page that its row does not allow."""
    own = {dotted.split(".")[1] for dotted in imported if dotted.startswith("app.")}
    own |= {"engine"} & {dotted.split(".")[0] for dotted in imported}
    return sorted(own - APP[part] - {part})


ENGINE_FILES = sorted(path for path in (ROOT / "engine").glob("*.py") if path.stem != "__init__")
APP_FILES = sorted(path for path in (ROOT / "app").rglob("*.py") if path != ROOT / "app" / "__init__.py")


def part_of(path):
    """The part of the page a file belongs to: its folder below app/, or itself."""
    return path.relative_to(ROOT / "app").parts[0].removesuffix(".py")


@pytest.mark.parametrize("path", ENGINE_FILES, ids=lambda path: path.stem)
def test_engine_module_imports_from_above(path):
    assert path.stem in ENGINE, f"engine/{path.name} has no line in the table: give it one"
    assert engine_faults(path.stem, imports(path)) == []


@pytest.mark.parametrize("path", APP_FILES, ids=lambda path: str(path.relative_to(ROOT / "app")))
def test_app_module_imports_what_its_row_allows(path):
    assert part_of(path) in APP, f"{path.name} has no row in the table: give it one"
    assert app_faults(part_of(path), imports(path)) == []


def test_wrong_arrows_are_found(tmp_path):
    """The check itself: it must see each kind of wrong arrow."""
    wrong = tmp_path / "wrong.py"
    wrong.write_text("def f():\n    from engine import modes\n    import panel\n    from app.worker import shared\n")
    found = imports(wrong)
    assert engine_faults("film", found) == ["app.worker", "modes", "panel"]
    assert app_faults("controls", found) == ["engine", "worker"]
