"""Rules of the house as tests: floors, file length, docstrings, public names, light import."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import aquabuf

ROOT = Path(aquabuf.__file__).parent
FILES = sorted(ROOT.rglob("*.py"))
FLOORS = ["errors", "arrays", "tables", "units", "chem", "engine", "readings", "assess", "report", "cli"]
LONGEST = 400  # lines
ALLOWED = {  # imports from outside the standard library, by floor; pandas from the readings upward
    "errors": {"numpy"}, "units": {"numpy"}, "arrays": {"numpy"}, "tables": {"numpy"}, "chem": {"numpy", "scipy"},
    "engine": {"numpy", "scipy"}, "readings": {"numpy", "scipy", "pandas"}, "assess": {"numpy", "scipy", "pandas"},
    "report": {"numpy", "scipy", "pandas", "matplotlib"}, "cli": {"numpy", "scipy", "pandas", "click"},
}


def name_of(path):
    """Path below the package, for readable test names."""
    return str(path.relative_to(ROOT))


def floor_of(path):
    """The floor a file stands on; the front door of the package stands on none."""
    return path.relative_to(ROOT).parts[0].removesuffix(".py")


def imported(tree):
    """Dotted names of all modules that a file imports, also inside functions."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are written in full"
            yield node.module
            if node.module == "aquabuf":
                yield from (f"aquabuf.{alias.name}" for alias in node.names)


HOUSE = [path for path in FILES if path != ROOT / "__init__.py"]


@pytest.mark.parametrize("path", HOUSE, ids=name_of)
def test_imports_go_downward(path):
    """A module imports from its own floor or a lower one, and only the libraries its floor may know."""
    mine = floor_of(path)
    for module in imported(ast.parse(path.read_text(encoding="utf-8"))):
        first, _, rest = module.partition(".")
        if first == "aquabuf":
            floor = rest.partition(".")[0]
            if floor in ("", "__version__"):  # the front door itself; what it offers is imported from its home
                continue
            assert FLOORS.index(floor) <= FLOORS.index(mine), f"{module} is above {mine}"
        elif first not in sys.stdlib_module_names:
            assert first in ALLOWED[mine], f"{mine} must not import {first}"


@pytest.mark.parametrize("path", FILES + sorted(Path(__file__).parent.rglob("*.py")), ids=lambda p: "/".join(p.parts[-2:]))
def test_no_file_is_too_long(path):
    """A file that answers one question fits 400 lines."""
    assert len(path.read_text(encoding="utf-8").splitlines()) <= LONGEST


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_public_things_have_docstrings(path):
    """Every module, public class, function and method says what it does."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    assert ast.get_docstring(tree), "the module has no docstring"
    owners = [tree] + [n for n in tree.body if isinstance(n, ast.ClassDef) and not n.name.startswith("_")]
    for owner in owners:
        for node in owner.body:
            if isinstance(node, ast.FunctionDef | ast.ClassDef) and not node.name.startswith("_"):
                assert ast.get_docstring(node), f"{node.name} has no docstring"


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_what_a_module_offers_exists(path):
    """`__all__` names only what the module defines or fetches."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    offered = [ast.literal_eval(n.value) for n in tree.body if isinstance(n, ast.Assign)
               and any(isinstance(t, ast.Name) and t.id == "__all__" for t in n.targets)]
    if offered and path != ROOT / "__init__.py":
        module = ".".join(("aquabuf", *path.relative_to(ROOT).with_suffix("").parts)).removesuffix(".__init__")
        loaded = __import__(module, fromlist=["x"])
        assert [n for n in offered[0] if not hasattr(loaded, n)] == []


def test_public_names_of_the_package():
    """What a user imports from aquabuf; a new name is added here on purpose."""
    assert sorted(aquabuf.__all__) == ["Acid", "Water", "__version__", "mix"]
    assert all(hasattr(aquabuf, name) for name in aquabuf.__all__)
    with pytest.raises(AttributeError, match="module 'aquabuf' has no attribute 'lake'"):
        _ = aquabuf.lake


PUBLIC_OF_WATER = {
    "from_ph_alkalinity", "from_alkalinity_dic", "from_ph_dic", "from_alkalinity_pco2", "from_ph_pco2", "from_dic_pco2",
    "shape", "status", "status_words", "require_solved", "residual_eq_l", "ph", "ph_total", "ph_on", "alkalinity_eq_l",
    "dic_mol_l", "pco2_atm", "t_c", "salinity", "ionic_strength_mol_l", "is_marine", "density_kg_l", "pressure_atm", "state",
    "options", "total_names", "total_mol_l", "species_mol_l", "charge_eq_l",
    "buffer_intensity_eq_l", "buffer_by_pair", "effective_ranges", "carrier", "weakest_buffering", "acid_to_ph_eq_l",
    "base_to_ph_eq_l", "curve", "after_acid", "at_pco2", "at_air", "at_temperature",
    "pco2_air_ratio", "saturation_index", "saturation_ratio", "precipitation_potential_mol_l", "ph_at_saturation",
}


def test_public_names_of_water():
    """What a `Water` can be asked; a new name is added here on purpose."""
    assert {n for n in vars(aquabuf.Water) if not n.startswith("_")} == PUBLIC_OF_WATER


def loaded_after(statement):
    """Names of modules in memory after one statement in a fresh interpreter."""
    code = f"{statement}; import sys; print('\\n'.join(sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT.parent)
    return set(done.stdout.split())


def test_import_is_light():
    """The package starts without numpy, so that the command line answers fast."""
    assert not loaded_after("import aquabuf") & {"numpy", "scipy", "pandas", "matplotlib", "click"}


def test_engine_does_not_draw_or_read_tables():
    """Solving a water loads neither pandas nor matplotlib."""
    statement = "from aquabuf import Water; Water.from_ph_dic(ph=7, dic_mol_l=1e-3, t_c=20).ph"
    assert not loaded_after(statement) & {"pandas", "matplotlib", "click"}
