"""Treatment products: published stoichiometry, laws over every row, names people write, strengths on any basis."""

import pytest
from numpy.testing import assert_allclose
from published_rows import MARKS, read_rows

from aquabuf.chem.acids import acid_table
from aquabuf.chem.products import (
    FORMS,
    atoms,
    find_product,
    molar_mass,
    own_product,
    products,
    strength_of,
    with_basicity,
    zero_level_charge,
)
from aquabuf.errors import InputError
from aquabuf.tables import read_table
from aquabuf.units import substances

ROWS = read_rows("treatment_products")
BASIC = [name for name, product in products().items() if "basicity" in product.groups]
READY = [product for name, product in products().items() if name not in BASIC] + [
    with_basicity(products()[name], b) for name in BASIC for b in (0.0, 0.4, 0.85)]
EVERY_READY = pytest.mark.parametrize("product", READY, ids=lambda p: p.name)

# Charge that each dissolved total counts with at pH 4.5, and its element; written down apart from the code.
CHARGE = {"calcium": 2, "magnesium": 2, "sodium": 1, "potassium": 1, "ammonium": 1, "chloride": -1, "nitrate": -1,
          "fluoride": -1, "phosphate": -1, "sulfate": -2, "silica": 0, "hypochlorite": 0}
ELEMENT = {"calcium": "Ca", "magnesium": "Mg", "sodium": "Na", "potassium": "K", "ammonium": "N", "chloride": "Cl",
           "nitrate": "N", "fluoride": "F", "phosphate": "P", "sulfate": "S", "silica": "Si", "hypochlorite": "Cl",
           "carbon": "C"}
MASS = {"Na": ("sodium", 22.990), "Ca": ("calcium", 40.078), "Cl": ("chloride", 35.45), "SO4": ("sulfate", 96.056),
        "C": ("carbon", 12.011)}


# ---------------------------------------------------------------- published stoichiometry


def computed(row):
    """What the code makes of a row of the published table."""
    product = products()[row["product"]]
    product = with_basicity(product, float(row["basicity"])) if row["basicity"] else product
    if row["quantity"] == "caco3_g_per_g":
        return product.caco3_g_per_g
    if row["quantity"] == "solid_g_per_g":
        (solid, count), = product.solids.items()
        return count * molar_mass(solid) / product.molar_mass_g
    name, mass = MASS[row["quantity"].removesuffix("_g_per_g")]
    return product.adds[name] * mass / product.molar_mass_g


@pytest.mark.parametrize("row", ROWS, ids=lambda r: f"{r['product']} {r['basicity']} {r['quantity']} {r['expected']}")
def test_published_stoichiometry(row):
    """Each row of `tests/published/treatment_products.csv`."""
    assert row["mark"] in MARKS
    assert len(row["source"]) > 5
    assert_allclose(computed(row), float(row["expected"]), rtol=0, atol=float(row["atol"]))


def test_every_product_has_a_published_alkalinity():
    """A product that nobody checked cannot be shipped."""
    assert {r["product"] for r in ROWS if r["quantity"] == "caco3_g_per_g"} == set(products())


def alk(name):
    """mg/L as CaCO3 per mg/L of the pure product."""
    return find_product(name).caco3_g_per_g


LB_PER_MG = 3.785411784 / 0.45359237  # lb in a million US gallons per mg/L


@pytest.mark.parametrize(("value", "expected", "atol"), [
    (-40 * alk("ferric chloride") / alk("NaOH"), 29.6, 0.06),           # exam: neutralize 40 mg/L FeCl3
    (-40 * alk("ferric chloride") / alk("CaO"), 20.7, 0.06),
    ((-52 * alk("alum 18-water") + 30 - 36) / alk("hydrated lime"), 12.9, 0.06),   # alum 52, keep 30 of 36
    ((-52 * alk("alum 14-water") + 30 - 36) / alk("hydrated lime"), 15.0, 0.06),
    (16 / alk("hydrated lime") / 0.95, 12.47, 0.006),
    ((-41 * alk("alum 14-water") - 10) / alk("NaOH"), 8.56, 0.006),     # alum 41 on alkalinity 10
    ((-110 * alk("alum 14-water") - 20) / alk("CaO"), 19.9, 0.06),      # alum 110 on alkalinity 20
    (57 + 33 * alk("alum 14-water"), 40.3, 0.06),
    (-10 * alk("ferric chloride") / alk("hydrated lime"), 6.85, 0.006),
    (130 + 60 * alk("alum 14-water"), 99.7, 0.06),
    (130 + 60 * alk("alum 18-water"), 103.0, 0.06),
    (136 + 30 * alk("ferric chloride"), 108.2, 0.06),
    (29.5735 * 1.835 * 0.93 / 378.5411784 * 1e3 * alk("sulfuric acid"), -136.06, 0.02),  # 1 fl oz in 100 gal
    (LB_PER_MG / alk("soda ash"), 8.838, 0.001),                        # lb per million gallons per mg/L as CaCO3
    (-alk("alum 14-water") / alk("quicklime") / 0.85, 0.33, 0.006),     # companions of 1 mg alum
    (-alk("alum 14-water") / alk("hydrated lime") / 0.95, 0.39, 0.006),
    (-alk("alum 14-water") / alk("soda ash"), 0.535, 0.0006),
    (-alk("alum 18-water") / alk("quicklime") / 0.90, 0.28, 0.006),
    (-alk("alum 18-water") / alk("hydrated lime") / 0.95, 0.35, 0.006),
    (-alk("alum 18-water") / alk("soda ash"), 0.48, 0.006),
])
def test_worked_examples_of_operators(value, expected, atol):
    """Operator exercises and classic companion sets that are pure stoichiometry, as printed and worked again by hand."""
    assert_allclose(value, expected, rtol=0, atol=atol)


# ---------------------------------------------------------------- laws over every row


@EVERY_READY
def test_alkalinity_is_the_charge_of_what_is_added(product):
    """A product is neutral: charge of its ions at the zero level equals the alkalinity it adds."""
    charge = sum(CHARGE[name] * n for name, n in product.adds.items() if name not in ("alkalinity", "carbon"))
    assert_allclose(product.adds["alkalinity"], charge, rtol=0, atol=1e-12)


@EVERY_READY
def test_every_atom_goes_somewhere(product):
    """Atoms other than H and O are all dissolved or in the solid; the chloride of PACl is outside its formula."""
    found = {}
    for name, n in product.adds.items():
        if name in ELEMENT and n and not (name == "chloride" and product.formula == "Al"):
            found[ELEMENT[name]] = found.get(ELEMENT[name], 0) + n
    for solid, n in product.solids.items():
        for element, count in atoms(solid).items():
            found[element] = found.get(element, 0) + n * count
    own = {element: n for element, n in atoms(product.formula).items() if element not in "OH"}
    assert {e: n for e, n in found.items() if e not in "OH"} == own


@pytest.mark.parametrize("name", CHARGE)
def test_charges_of_totals_follow_the_engine(name):
    """Zero levels are those of the engine's acids and ions; phosphate counts as H2PO4-, chlorine as HOCl."""
    assert zero_level_charge(name) == CHARGE[name]


def test_rows_say_what_they_are():
    """Forms, ranges, densities, marks and sources stand; the usual strength lies in its range."""
    for row, product in zip(read_table("products"), products().values(), strict=True):
        assert product.form in FORMS
        assert row["mark"] in {"printed", "recalled", "derived"}
        assert len(product.source) > 10
        low, high = product.strength_low or 0.0, product.strength_high or 1.0
        assert 0.0 <= low <= (product.strength or low) <= high <= 1.0
        lightest = 0.3 if product.form == "solid" else 0.85  # bulk density of powders; ammonia water
        assert product.density_kg_l is None or lightest < product.density_kg_l < 2.0
    assert [p.name for p in products().values() if p.strength is not None and p.mark == "derived"] == []


# ---------------------------------------------------------------- formulas


def test_formulas_are_counted():
    """Brackets, hydrates, decimal waters."""
    assert atoms("CaMg(CO3)2") == {"Ca": 1, "Mg": 1, "C": 2, "O": 6}
    assert atoms("Al2(SO4)3.14.3H2O") == {"Al": 2, "S": 3, "O": 26.3, "H": 28.6}
    assert atoms("CaCO3·MgO") == {"Ca": 1, "C": 1, "O": 4, "Mg": 1}
    assert atoms("Mg3(Si2(OH)2)4") == {"Mg": 3, "Si": 8, "O": 8, "H": 8}


@pytest.mark.parametrize("formula", sorted({p.formula for p in READY}))
def test_molar_masses_against_another_library(formula):
    """The sum over atomic masses of a general chemistry library, rounded per atom; sulfur and chlorine vary in nature."""
    library = pytest.importorskip("molmass")
    salt, _, water = formula.replace("·MgO", "MgO").partition(".")
    expected = library.Formula(salt).mass + (float(water.removesuffix("H2O")) * library.Formula("H2O").mass if water else 0.0)
    count = atoms(formula)
    assert_allclose(molar_mass(formula), expected, rtol=0,
                    atol=0.0006 * sum(count.values()) + 0.005 * count.get("S", 0) + 0.004 * count.get("Cl", 0))


def test_atomic_masses_agree_with_the_ion_table():
    """One element has one mass in the whole house."""
    for substance in substances().values():
        assert_allclose(molar_mass(substance.formula), substance.molar_mass_g, rtol=0, atol=0.0015)


@pytest.mark.parametrize(("formula", "why"), [
    ("Ca(OH2", "bracket stays open"), ("Ca)2", "bracket closes"), ("Xx2", "'Xx' is no element"), ("", "cannot be read"),
    ("caco3", "cannot be read"), ("Ca0", "Ca has a count of 0"), (".5H2O", "cannot be read"), ("NaCl.", "cannot be read"), ("Ca OH", "cannot be read"),
])
def test_a_formula_that_is_none(formula, why):
    """The message says what cannot be read and shows a formula that can."""
    with pytest.raises(InputError, match=rf"not a chemical formula: .*{why}.*Ca\(OH\)2"):
        atoms(formula)


# ---------------------------------------------------------------- names


@pytest.mark.parametrize(("written", "meant"), [
    ("Hydrated Lime", "hydrated lime"), ("slaked lime", "hydrated lime"), ("calcite", "limestone"), ("caustic", "caustic soda"),
    ("NaOH", "caustic soda"), ("caustic soda 50%", "caustic soda 50 %"), ("muriatic acid", "hydrochloric acid"),
    ("Ca(OH)2", "hydrated lime"), ("Al2(SO4)3.18H2O", "alum 18-water"), ("bleach", "sodium hypochlorite"), ("CO2", "carbon dioxide"),
    ("magnesia", "magnesium oxide"), ("copperas", "ferrous sulfate 7-water"), ("fluorosilicic_acid", "fluosilicic acid"),
])
def test_names_people_write(written, meant):
    """Any case, other names, formulas."""
    assert find_product(written).name == meant


def test_every_name_and_formula_is_found():
    """No row hides behind another one's name."""
    for name, product in products().items():
        assert find_product(name) is product
        assert find_product(product.formula).formula == product.formula


@pytest.mark.parametrize(("written", "asked"), [
    ("alum", r"14-water' \(.*14H2O, solid, takes 0\.505\).*18-water' \(.*takes 0\.451\).*anhydrous' \(.*takes 0\.878\)"),
    ("liquid alum", r"as 14-water' .*liquid, takes 0\.505.*as 14\.3-water' .*0\.501.*as 18-water' .*0\.451"),
    ("ferric sulfate", r"anhydrous' \(Fe2\(SO4\)3, liquid, takes 0\.751\).*9-water' .*0\.534"),
    ("lime", r"'hydrated lime' .*adds 1\.351.*'quicklime' .*adds 1\.785"),
    ("soda", r"'soda ash' .*adds 0\.944.*'sodium bicarbonate' .*adds 0\.596"),
    ("orthophosphate", r"'phosphoric acid' .*'monosodium phosphate' .*leaves alkalinity"),
    ("PACl", r"'polyaluminum chloride' .*by its basicity"),
])
def test_a_name_of_several_products_is_asked(written, asked):
    """Each candidate comes with what a mg of it does."""
    with pytest.raises(InputError, match=rf"^'{written}' can mean several products\. Say which.*{asked}"):
        find_product(written)


def test_an_unknown_name_names_the_nearest():
    """A slip of the pen is one word away."""
    with pytest.raises(InputError, match=r"no product is called 'quiklime'; nearest: quicklime.*product of your own"):
        find_product("quiklime")
    with pytest.raises(InputError, match=r"no product is called 'zzz'; nearest: hydrated lime, .*ammonium hydroxide"):
        find_product("zzz")


# ---------------------------------------------------------------- strength


@pytest.mark.parametrize(("product", "fraction", "basis", "expected", "atol"), [
    ("alum 14-water", 0.17, "Al2O3", 0.9909, 1e-4),            # 594.34 x 0.17 / 101.961
    ("liquid alum as 18-water", 0.083, "al2o3", 0.5425, 1e-4),  # 666.40 x 0.083 / 101.961
    ("liquid alum as 14-water", 0.5425, "Al2(SO4)3.18H2O", 0.4838, 1e-4),
    ("liquid alum as 14-water", 0.5425, "alum 18-water", 0.4838, 1e-4),
    ("liquid alum as 14-water", 0.0439, "Al", 0.4835, 1e-4),   # 594.34 x 0.0439 / 53.964
    ("polyaluminum chloride", 0.17, "Al2O3", 0.08998, 1e-5),   # 53.964 / 101.961
    ("hydrated lime", 0.72, "CaO", 0.9513, 1e-4),              # 74.092 / 56.077
    ("hydrated lime", 1.28, "CaCO3", 0.9476, 1e-4),            # over 1.3508
    ("sodium hypochlorite", 0.12, "available chlorine", 0.1260, 1e-4),  # 74.44 / 70.90
    ("sodium hypochlorite", 0.12, "Cl2", 0.1260, 1e-4),
    ("calcium hypochlorite", 0.65, "available chlorine", 0.6554, 1e-4),  # 142.98 / 141.80
    ("phosphoric acid", 0.616, "P2O5", 0.8506, 1e-4),          # 2 x 97.994 / 141.943
    ("ferric chloride", 0.138, "Fe", 0.4008, 1e-4),            # 162.195 / 55.845
    ("ferric chloride", 0.40, "FeCl3", 0.40, 1e-12),
    ("ferric chloride", 0.6666, "FeCl3.6H2O", 0.4000, 1e-4),   # 162.195 / 270.285
    ("ammonium hydroxide 28 %", 0.2303, "N", 0.28, 1e-4),      # 17.031 / 14.007
    ("fluosilicic acid", 0.182, "F", 0.2301, 1e-4),            # 144.09 / 113.99
    ("caustic soda", 0.3874, "Na2O", 0.5, 1e-4),               # 2 x 39.997 / 61.979
])
def test_strength_on_another_basis(product, fraction, basis, expected, atol):
    """Hand-worked ratios of molar masses."""
    assert_allclose(strength_of(products()[product], fraction, basis), expected, rtol=0, atol=atol)


def test_printed_ranges_come_out_in_the_active_substance():
    """What the table states as Al2O3 is read as aluminum: 10, 18 and 30 % times 53.964/101.961."""
    liquid, powder = (products()[name] for name in BASIC)
    assert_allclose([liquid.strength_low, liquid.strength_high, powder.strength], [0.05293, 0.09527, 0.15878], atol=1e-5)
    assert products()["liquid alum as 14.3-water"].strength == 0.4885


@pytest.mark.parametrize(("product", "fraction", "basis", "words"), [
    ("hydrated lime", 92.0, "Ca(OH)2", r"fraction above 0; found 92\. Give 92 % as 0\.92"),
    ("hydrated lime", 0.0, "CaO", "fraction above 0; found 0"),
    ("hydrated lime", float("nan"), "CaO", "fraction above 0; found nan"),
    ("hydrated lime", 0.9, "CaO", r"90 % as CaO is more than pure Ca\(OH\)2 holds \(75\.69 %\) in 'hydrated lime'. Check"),
    ("alum 14-water", 0.2, "Fe", "cannot be counted as 'Fe': it holds no fixed share of it. State it as"),
    ("ferric chloride", 0.2, "available chlorine", "cannot be counted as 'available chlorine'"),
    ("sulfuric acid", 0.2, "CaCO3", "cannot be counted as 'CaCO3'"),
    ("caustic soda", 0.2, "NaCl", "cannot be counted as 'NaCl'"),
    ("caustic soda", 0.2, "H2O", "cannot be counted as 'H2O'"),
    ("caustic soda", 0.2, "purity", "'purity' is not a chemical formula"),
])
def test_strength_that_cannot_be(product, fraction, basis, words):
    """Per cent for a fraction, more than pure, or a basis the product does not hold."""
    with pytest.raises(InputError, match=words):
        strength_of(products()[product], fraction, basis)


# ---------------------------------------------------------------- basicity


@pytest.mark.parametrize("use", [
    lambda p: p.adds["alkalinity"], lambda p: dict(p.adds), lambda p: len(p.adds), lambda p: p.caco3_g_per_g])
@pytest.mark.parametrize("name", BASIC)
def test_pacl_cannot_be_used_without_its_basicity(name, use):
    """Every use asks."""
    with pytest.raises(InputError, match=f"'{name}' takes alkalinity according to its basicity.*State the basicity"):
        use(products()[name])


def test_basicity_makes_a_product_of_its_own():
    """Named with its basicity, and not asked again."""
    half = with_basicity(products()["polyaluminum chloride"], 0.5)
    assert half.name == "polyaluminum chloride, basicity 50 %"
    assert dict(half.adds) == {"alkalinity": -1.5, "carbon": 0.0, "chloride": 1.5}
    assert dict(half.solids) == {"Al(OH)3": 1.0}
    with pytest.raises(InputError, match=r"'polyaluminum chloride, basicity 50 %' has no basicity; found 0\.5\. Leave it out"):
        with_basicity(half, 0.5)


@pytest.mark.parametrize("basicity", [50.0, 1.0, -0.1, float("nan")])
def test_basicity_out_of_range(basicity):
    """Per cent is not a fraction."""
    with pytest.raises(InputError, match=rf"must be 0 to below 1; found {basicity:g}\. Give 50 % as 0\.5"):
        with_basicity(products()["polyaluminum chloride"], basicity)


# ---------------------------------------------------------------- products of the user's own


def test_own_product_counts_its_charge():
    """Alkalinity follows from the ions: potassium carbonate adds 2 eq and 1 mol of carbon in 138.204 g."""
    own = own_product("potash", formula="K2CO3", ions={"potassium": 2}, carbon=1, form="solid", strength=0.98)
    assert dict(own.adds) == {"alkalinity": 2.0, "carbon": 1, "potassium": 2}
    assert_allclose(own.molar_mass_g, 138.204, rtol=0, atol=6e-4)
    assert_allclose(own.caco3_g_per_g, 100.086 / 138.204, rtol=1e-5)
    assert (own.form, own.strength, own.mark) == ("solid", 0.98, "given")


def test_own_product_without_formula():
    """A trade product known by what a mass of it does."""
    own = own_product("blend", molar_mass_g=100.0, alkalinity=-0.8, solids={"Al(OH)3": 0.3}, density_kg_l=1.2)
    assert_allclose(own.caco3_g_per_g, -0.8 * 50.043 / 100.0, rtol=1e-6)
    assert (own.formula, dict(own.solids), own.density_kg_l) == ("blend", {"Al(OH)3": 0.3}, 1.2)


@pytest.mark.parametrize(("given", "words"), [
    ({}, "needs the formula or the molar mass.*neither is given"),
    ({"formula": "KOH"}, "must say what it adds; neither alkalinity nor ions nor carbon"),
    ({"formula": "KOH", "alkalinity": 2, "ions": {"potassium": 1}}, "charge by its ions, 1 eq/mol; found 2.*missing ions"),
    ({"formula": "KOH", "ions": {"potasium": 1}}, "'potasium' is not a dissolved total.*'calcium'"),
    ({"formula": "KOH", "alkalinity": 1, "form": "powder"}, "one of solid, liquid, slurry, gas; found 'powder'"),
    ({"formula": "KOH", "alkalinity": 1, "strength": 45.0}, "strength of product 'mine' must be above 0 and at most 1; found 45"),
    ({"molar_mass_g": -5.0, "alkalinity": 1}, "molar mass of product 'mine' must be above 0"),
    ({"formula": "KOH", "alkalinity": 1, "density_kg_l": 1450.0}, "density of product 'mine' .* at most 25; found 1450"),
    ({"formula": "KOH", "alkalinity": 1, "solids": {"mud": 1}}, "'mud' is not a chemical formula"),
])
def test_own_product_that_cannot_be(given, words):
    """Each message says what is missing or wrong."""
    with pytest.raises(InputError, match=words):
        own_product("mine", **given)


def test_weak_acids_of_products_are_known_to_the_engine():
    """What counts at its zero level is a weak acid of the engine, so that the pH after dosing sees it."""
    assert {"phosphate", "ammonium", "hypochlorite", "fluoride", "silica"} <= set(acid_table())
