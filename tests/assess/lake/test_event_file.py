"""The file of event water: what it becomes in house units and charges, its draws, and every message."""

from importlib.resources import files

import numpy as np
import pytest
from carbonate_by_hand import BareWater
from numpy.testing import assert_allclose, assert_array_equal

from aquabuf.assess.lake.budget import GRAN_PH
from aquabuf.assess.lake.episode import ion_anc, mix
from aquabuf.assess.lake.event_file import DEFAULT_RELATIVE_U, read_event, water_of_event
from aquabuf.chem.organic import organic_models
from aquabuf.errors import FileError, InputError

HRUSKA = organic_models()["hruska"]
AIR_PPM = 425.0
EVENT = '[event]\nname = "melt"\nfraction = 0.4\n'
IONS = ('"calcium (µeq/L)" = 14\n"magnesium (µeq/L)" = 5\n"sodium (µeq/L)" = 11\n"potassium (µeq/L)" = 4\n'
        '"sulfate (µeq/L)" = 30\n"nitrate (µeq/L)" = 21\n"chloride (µeq/L)" = 12\n')
COLD = "[water]\ntemperature_c = 10.0\n"


@pytest.fixture
def event_of(tmp_path):
    """Event water read from the text of a file."""
    def read(text):
        path = tmp_path / "melt.toml"
        path.write_text(text, encoding="utf-8")
        return read_event(path)
    return read


def water(event, **changes):
    """Event water as single numbers."""
    return {k: float(v[0, 0]) for k, v in water_of_event(event, HRUSKA, AIR_PPM, **changes).items()}


# ---------------------------------------------------------------- values


def test_ions_become_charges_and_their_sum_the_anc(event_of):
    """34 base cations less 63 acid anions; ammonium adds, fluoride takes."""
    event = event_of(EVENT + COLD + IONS + '"ammonium (µeq/L)" = 6\n"fluoride (µeq/L)" = 2\n')
    found = water(event)
    assert_allclose([found[f"{ion}_eq_l"] for ion in ("calcium", "sulfate", "ammonium")], [14e-6, 30e-6, 6e-6], rtol=1e-12)
    assert_allclose(found["anc_eq_l"], (34 + 6 - 63 - 2) * 1e-6, atol=1e-15)
    assert_allclose(water(event_of(EVENT + COLD + IONS))["anc_eq_l"], -29e-6, atol=1e-15)
    assert (event.name, event.fractions, event.anc_from, event.carbon_from) == ("melt", (0.4,), "ions", "equilibrium with air")


@pytest.mark.parametrize(("line", "name", "expected"), [
    ('"sulfate (mg/L)" = 0.96056', "sulfate_mol_l", 1e-5), ('sulfate_mg_l_s = 0.3206', "sulfate_mol_l", 1e-5),
    ('"NO3-N (µg/L)" = 140.07', "nitrate_mol_l", 1e-5), ('"Ca (meq/L)" = 0.02', "calcium_mol_l", 1e-5),
    ('"aluminium (µg/L)" = 26.982', "aluminum_mol_l", 1e-6), ('"anc (mg/L as CaCO3)" = -1.00086\nanc_method = "gran"', "anc_eq_l", -2e-5),
    ('"pco2 (µatm)" = 900', "pco2_atm", 9e-4), ('"temperature (°F)" = 50', "temperature_c", 10.0), ("doc_mg_l = 3", "doc_mg_l", 3.0)])
def test_any_unit_of_a_table_of_readings(event_of, line, name, expected):
    """Keys are headers; molar masses 96.056, 32.06, 14.007, 26.982 and 100.086/2 g (IUPAC)."""
    base = "[water]\nph = 5\n" + ("" if "temperature" in line else "temperature_c = 10\n")
    assert_allclose(event_of(EVENT + base + line).values[name], expected, rtol=1e-9)


@pytest.mark.parametrize(("fraction", "expected"), [("0.4", (0.4,)), ("[0.2, 0.4]", (0.2, 0.4)), ("1", (1.0,)), ("[0.4, 0.4]", (0.4,)), ("0.01", (0.01,))])
def test_one_share_or_several(event_of, fraction, expected):
    """Each share once, in the order given."""
    assert event_of(EVENT.replace("0.4", fraction) + COLD + "ph = 5").fractions == expected


# ---------------------------------------------------------------- ANC and carbon


def test_anc_by_charge_balance_stands_as_given(event_of):
    """No ions are needed; those that are not given stay open in the bookkeeping."""
    event = event_of(EVENT + COLD + 'doc_mg_l = 5\n"anc (µeq/L)" = -20\nanc_method = "charge_balance"')
    found = water(event)
    assert_allclose(found["anc_eq_l"], -20e-6, rtol=1e-12)
    assert np.isnan(found["sulfate_eq_l"])
    assert found["ammonium_eq_l"] == 0.0
    assert event.anc_from == "ANC given by charge balance"


def test_titrated_anc_gets_its_organic_anions_back(event_of):
    """A Gran line leaves out A - h dA/dh of the organic anions and of aluminum; both by mass action and a difference."""
    found = water(event_of(EVENT + COLD + 'doc_mg_l = 5\n"aluminum (µmol/L)" = 2\n"anc (µeq/L)" = -20\nanc_method = "gran"'))

    def left_out(h):
        w = np.cumprod([1.0, *(10.0**-p / h for p in (3.04, 4.51, 6.46))])
        b = np.array([1.0, *(10.0**log / h**n for n, log in enumerate((-5.00, -10.1, -16.9, -22.7), start=1))])
        return 5 * 10.2 * (w @ np.arange(4)) / w.sum() / 3 - 2 * (b @ np.array([3.0, 2.0, 1.0, 0.0, -1.0])) / b.sum()
    h, step = 10.0**-GRAN_PH, 1e-10
    slope = (left_out(h + step) - left_out(h - step)) / (2 * step)
    assert_allclose(found["anc_eq_l"] * 1e6, -20.0 + left_out(h) - h * slope, rtol=1e-5)


def test_event_known_by_its_ph_only(event_of):
    """At air: carbonate of the CO2 held less H+, by hand; the mixing engine then has all it needs."""
    event = event_of(EVENT + COLD + "ph = 4.6")
    found = water(event)
    strength = 2e-5  # what the conditions take where nothing tells it
    hand = BareWater(10.0, strength)
    co2 = AIR_PPM * 1e-6 * (1.0 - 0.0121) * hand.k0  # vapor pressure of water at 10 °C: 0.0121 atm
    assert_allclose(found["anc_eq_l"], hand.alkalinity_at_co2(4.6, co2), rtol=2e-3)
    assert_allclose(found["dic_mol_l"], co2 / hand.shares(4.6)[0], rtol=5e-3)
    assert event.anc_from == "pH"


def test_carbon_given(event_of):
    """Inorganic carbon as such; a CO2 pressure as what it holds at the pH it makes."""
    acid = EVENT + COLD + '"anc (µeq/L)" = -50\nanc_method = "charge_balance"\n'
    assert_allclose(water(event_of(acid + '"dic (µmol/L)" = 77'))["dic_mol_l"], 77e-6, rtol=1e-12)
    event = event_of(acid + '"pco2 (µatm)" = 2000')
    hand = BareWater(10.0, 2e-5)
    co2 = 2e-3 * hand.k0
    ph = hand.ph_at_co2(-50e-6, co2)
    assert_allclose(water(event)["dic_mol_l"], co2 / hand.shares(ph)[0], rtol=5e-3)
    assert event.carbon_from == "CO2 pressure given"
    assert event_of(acid + "dic_mol_l = 7e-5").carbon_from == "inorganic carbon given"


def test_words_say_what_is_left_out(event_of):
    """Sources, missing ions, what counts as none, an unused pH and the default uncertainty."""
    event = event_of(EVENT + COLD + 'ph = 4.7\n"sulfate (µeq/L)" = 30\n"anc (µeq/L)" = -20\nanc_method = "gran"')
    assert event.in_words() == [
        "melt: ANC from ANC given (gran), carbon from equilibrium with air",
        "ions not given: calcium, magnesium, sodium, potassium, nitrate, chloride; what took the ANC cannot be told",
        "counted as none: ammonium, organic carbon, aluminum", "its pH is not used, because its ANC is known",
        "uncertainty where none is given: 20 % and the floor of the column table"]
    whole = event_of(EVENT + COLD + IONS + '"ammonium (µeq/L)" = 6\ndoc_mg_l = 1\n"aluminum (µg/L)" = 1')
    assert len(whole.in_words()) == 2


# ---------------------------------------------------------------- uncertainty


def test_own_uncertainty_and_the_default(event_of):
    """2.5 µmol/L of its own; else the floor of the column table and the relative part: 1 + 0.2 * 21, 5 + 0.2 * 20 µeq/L."""
    event = event_of(EVENT + COLD + IONS + '"sulfate_u (µeq/L)" = 5\n"anc (µeq/L)" = -20\nanc_method = "gran"\nph = 4.6')
    assert_allclose([event.u[n] for n in ("sulfate_mol_l", "nitrate_mol_l", "anc_eq_l")], [2.5e-6, 5.2e-6, 9e-6], rtol=1e-9)
    assert_allclose(event.u["ph"], 0.05 + 0.2 / np.log(10.0), rtol=1e-12)
    assert "temperature_c" not in event.u
    assert event.default_u == DEFAULT_RELATIVE_U == 0.2
    other = event_of(EVENT + "relative_uncertainty = 0.5\n" + COLD + IONS)
    assert_allclose(other.u["nitrate_mol_l"], 1e-6 + 0.5 * 21e-6, rtol=1e-9)
    for relative in (0, 2):
        edge = event_of(EVENT + f"relative_uncertainty = {relative}\n" + COLD + IONS)
        assert_allclose(edge.u["nitrate_mol_l"], 1e-6 + relative * 21e-6, rtol=1e-9)


def test_draws_spread_as_stated(event_of):
    """Mean and spread of the draws are the value and its uncertainty, amounts are not negative, the seed repeats them."""
    event = event_of(EVENT + COLD + IONS + '"sulfate_u (µeq/L)" = 3\n"potassium_u (µeq/L)" = 40\n')
    many = water_of_event(event, HRUSKA, AIR_PPM, draws=4000, seed=5)
    assert many["sulfate_eq_l"].shape == many["anc_eq_l"].shape == many["dic_mol_l"].shape == (1, 4000)
    assert_allclose([many["sulfate_eq_l"].mean(), many["sulfate_eq_l"].std()], [30e-6, 3e-6], rtol=0.05)
    assert many["potassium_eq_l"].min() == 0.0
    assert_allclose(ion_anc(many), many["anc_eq_l"], rtol=0, atol=1e-15)
    assert_array_equal(many["sulfate_eq_l"], event.drawn(4000, 5)["sulfate_mol_l"] * 2.0)
    assert (many["sulfate_eq_l"] != water_of_event(event, HRUSKA, AIR_PPM, draws=4000, seed=6)["sulfate_eq_l"]).all()


def test_event_is_not_drawn_with_the_lakes(event_of):
    """The streams of the lakes are those of the names; an event of the same names must go its own way."""
    from zlib import crc32
    event = event_of(EVENT + COLD + IONS)
    lakes = np.random.default_rng([1, crc32(b"sulfate_mol_l")]).standard_normal(2000)
    assert abs(np.corrcoef(lakes, event.drawn(2000, 1)["sulfate_mol_l"][0])[0, 1]) < 0.1


def test_organic_error_and_mixing_with_draws(event_of):
    """A drawn factor on organic anions goes into DOC; the event mixes with any number of lakes."""
    event = event_of(EVENT + COLD + IONS + "doc_mg_l = 4\ndoc_u_mg_l = 0\n")
    factor = np.linspace(0.5, 1.5, 100)[None, :]
    many = water_of_event(event, HRUSKA, AIR_PPM, draws=100, organic_error=factor)
    assert_allclose(many["doc_mg_l"], 4.0 * factor, rtol=1e-12)
    lakes = {name: np.full((3, 1), 1e-4) for name in many}
    assert mix(lakes, many, event.fractions[0])["dic_mol_l"].shape == (3, 100)


# ---------------------------------------------------------------- starter and messages


def test_starter_is_read_as_it_is_and_with_each_comment_taken_away(event_of):
    """The shipped starter, its way by ANC, its way by pH, and its two ways to carbon."""
    text = (files("aquabuf") / "data" / "starter_event.toml").read_text(encoding="utf-8")
    event = event_of(text)
    assert (len(event.fractions), event.missing_ions, event.anc_from) == (2, (), "ions")
    assert np.isfinite(list(water(event).values())).sum() == len(water(event))
    for line, source in (('# anc_method = "gran"', "ANC given (gran)"), ("# ph = 4.6", "ions"), ('# "pco2 (µatm)" = 900.0', "ions"),
                         ('# "dic (mg/L as C)" = 0.6', "ions")):
        assert line in text
        changed = text.replace(line, line[2:])
        changed = changed.replace('# "anc (µeq/L)"', '"anc (µeq/L)"') if "anc_method" in line else changed
        assert event_of(changed).anc_from == source


MESSAGES = [
    ("[event", r"melt.toml is not valid TOML: .*Correct that line"),
    ("x = 1\n" + EVENT + COLD + "ph = 5", r"melt.toml: tables must be \[event\] and \[water\]; found 'x'. Put the key into one"),
    ("event = 3\n" + COLD, r"\[event\] must be a table of keys and values; found 3. Write \[event\] and its keys below"),
    (EVENT, r"\[water\] must be a table of keys and values; found None"),
    (EVENT + "ph = 5\n" + COLD, r"\[event\]: keys must be name, fraction, relative_uncertainty; found 'ph'. Values of the water go"),
    (COLD + "[event]\nfraction = 0.4", r"\[event\]: name must be text; found None. Write name = \"first melt\""),
    (COLD + "[event]\nname = ' '\nfraction = 0.4", r"name must be text; found ' '"),
    (COLD + "ph = 5\n[event]\nname = 'x'", r"fraction must be one share of event water or a list .* at most 1; found None. Write 40 % as"),
    *((EVENT.replace("0.4", bad) + COLD + "ph = 5", rf"fraction must be one share .*; found {shown}\. Write")
      for bad, shown in (("0", "0"), ("40", "40"), ("nan", "nan"), ("true", "True"), ("[]", r"\[\]"), ("[0.2, 1.2]", r"\[0.2, 1.2\]"),
                         ('"0.4"', "'0.4'"), ('["0.4"]', r"\['0.4'\]"))),
    *((EVENT + f"relative_uncertainty = {bad}\n" + COLD + "ph = 5", r"relative_uncertainty must be a number from 0 to 2; found .*0\.2")
      for bad in ("-0.1", "2.1", "20", '"0.2"', "true", "nan")),
    (EVENT + COLD + 'anc_method = "end_point"\n"anc (µeq/L)" = 3', r"anc_method must be one of gran, curve_fit, charge_balance; found 'end_point'. An ANC to a fixed end point is another quantity"),
    (EVENT + COLD + '"anc (µeq/L)" = 3', r"anc and anc_method must come together; found anc alone. Add anc_method"),
    (EVENT + COLD + 'anc_method = "gran"\nph = 5', r"anc and anc_method must come together; found anc_method alone. Add anc\."),
    (EVENT + "[water]\nph = 5", r"\[water\]: the temperature is needed; it is missing. Add for example temperature_c = 1.0"),
    (EVENT + COLD + '"sulfate (µeq/L)" = 3', r"the ANC needs anc, or ph, or all of calcium, .*; found none of these, calcium, .* missing. Add one"),
    (EVENT + COLD + '"sulfat (µeq/L)" = 3', r"'sulfat \(µeq/L\)': keys must be anc_method or one of temperature, calcium, .*nearest known names are sulfate_mol_l.* Correct it or remove it"),
    (EVENT + COLD + "turbidity_ntu = 3", r"'turbidity_ntu': keys must be anc_method or one of .*; found 'turbidity_ntu'\."),
    (EVENT + COLD + "sulfate = 3", r"\[water\] 'sulfate': column 'sulfate' needs a unit: sulfate can be in .*Write it in the header"),
    (EVENT + COLD + '"nitrate (mg/L)" = 3', r"column 'nitrate \(mg/L\)' is ambiguous: mg/L of nitrate can mean mg/L as N or mg/L as NO3"),
    (EVENT + COLD + '"sulfate (µmol/kg)" = 3', r"'sulfate \(µmol/kg\)': must be per liter; found µmol/kg. Convert it"),
    *((EVENT + COLD + f'"sulfate (µeq/L)" = {bad}', r"'sulfate \(µeq/L\)': must be a number; found .*Write it without quotes; leave the key out")
      for bad in ('"<3"', "true", "nan", "[3]")),
    (EVENT + COLD + '"sulfate (µeq/L)" = -3', r"'sulfate \(µeq/L\)': must be from 0 to 2e\+07 µeq/L; found -3. Check value and unit"),
    (EVENT + "[water]\ntemperature_c = 99", r"'temperature_c': must be from -2 to 60 °C; found 99"),
    (EVENT + COLD + '"sulfate (µeq/L)" = 3\n"sulfate_u (µeq/L)" = -1', r"'sulfate_u \(µeq/L\)': must be at least 0 µeq/L; found -1"),
    (EVENT + COLD + '"sulfate (µeq/L)" = 3\n"SO4 (mg/L)" = 1', r"'SO4 \(mg/L\)': sulfate_mol_l must be given once; found a second key for it. Remove one"),
    (EVENT + COLD + 'ph = 5\n"sulfate_u (µeq/L)" = 1', r"\[water\]: sulfate_u_mol_l must go with a value; found none of sulfate. Add the value"),
]


@pytest.mark.parametrize(("text", "message"), MESSAGES, ids=[str(i) for i in range(len(MESSAGES))])
def test_messages(event_of, text, message):
    """Each mistake names file, table, key, value and remedy."""
    with pytest.raises(InputError, match=message) as error:
        event_of(text)
    assert str(error.value).startswith("melt.toml")


def test_file_that_cannot_be_read(tmp_path):
    """File errors say what and why."""
    with pytest.raises(FileError, match=r"the file of event water none.toml cannot be read: No such file or directory. Check the path"):
        read_event(tmp_path / "none.toml")
    with pytest.raises(FileError, match=r"cannot be read: Is a directory"):
        read_event(tmp_path)
    (tmp_path / "latin.toml").write_bytes("# µ".encode("latin-1"))
    with pytest.raises(FileError, match=r"latin.toml cannot be read: not UTF-8 text"):
        read_event(tmp_path / "latin.toml")
