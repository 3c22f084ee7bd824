"""From a plan to its steps: every kind is built and does what its keys ask for, by closed forms; what does not fit."""

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from numpy.testing import assert_allclose

sys.path.insert(0, str(Path(__file__).parents[2]))

from invented_plans import write_plan

from aquabuf.assess.plant.build import DONORS, build_steps
from aquabuf.assess.plant.plan_file import read_plan
from aquabuf.assess.plant.plan_keys import plan_keys, step_kinds
from aquabuf.assess.plant.stream import stream_of
from aquabuf.assess.plant.train import run_train
from aquabuf.errors import InputError

MG_CACO3 = 100.086 / 2.0 * 1e3  # mg/eq; molar masses of IUPAC here and below
NITROGEN, NAOH, CALCIUM, FLUORINE, CHLORINE = 14.007e3, 39.997, 40.078e3, 18.998e3, 70.90e3
HEAD = '''[plan]
name = "x"
[flow]
now = "10 ML/d"
[water]
temperature_c = 15
ph = 7.4
alkalinity = "200 mg/L as CaCO3"
calcium = "70 mg/L"
magnesium = "8 mg/L"
ammonium = "20 mg/L as N"
nitrate = "12 mg/L as N"
fluoride = "0.1 mg/L"
[sources.permeate]
share = "40 %"
temperature_c = 15
ph = 6.0
alkalinity = "10 mg/L as CaCO3"
[sources.well]
flow = "2 ML/d"
temperature_c = 15
ph = 7.0
alkalinity = "300 mg/L as CaCO3"
[products.alum]
is = "alum 14-water"
strength = "95 %"
[products.bleach]
is = "sodium hypochlorite"
strength = "12 %"
density = "1.2 kg/L"
[products.lime]
is = "hydrated lime"
strength = "90 %"
[products.soda]
is = "soda ash"
[products.gas]
is = "carbon dioxide"
strength = "100 %"
[products.stone]
is = "limestone"
strength = "98 %"
[products.silicon]
is = "fluosilicic acid"
strength = "24 %"
density = "1.21 kg/L"
[products.caustic]
is = "caustic soda 50 %"
'''
STEPS = {
    "coagulate": 'product = "alum"\ndose = "40 mg/L"\nfloor = "30 mg/L as CaCO3"\nph_window = [6.0, 7.2]',
    "chlorinate": 'product = "bleach"\ndose = "4 mg/L"\ndemand = "1.5 mg/L"\nexcess_caustic = "0.5 %"',
    "nitrify": 'oxidize = "10 mg/L as N"\nfloor = "75 mg/L as CaCO3"',
    "denitrify": 'remove = "7 mg/L as N"',
    "aerate": 'efficiency = "80 %"',
    "temperature": 'to = "22 °C"',
    "blend": 'with = ["permeate", "well"]',
    "soften": 'method = "single stage"\nlime = "lime"\nsoda_ash = "soda"',
    "recarbonate": 'product = "gas"\nph = 7.0',
    "contact": 'product = "stone"\nco2 = "gas"\nco2_dose = "15 mg/L"\napproach = "90 %"',
    "remineralize": 'mineral = "stone"\nco2 = "gas"\nalkalinity = "220 mg/L as CaCO3"',
    "fluoridate": 'product = "silicon"\nfluoride = "0.7 mg/L"',
    "dose": 'product = "caustic"\ndose = "12 mg/L"\ndose_as = "product"',
    "adjust": 'products = ["lime", "gas"]\ntarget = { ph = 7.9, alkalinity = "230 mg/L as CaCO3" }',
}


@pytest.fixture
def plan_of(tmp_path):
    """The plan of one step, or of the text of several."""
    def read(kind, keys=None):
        step = f'[[steps]]\ndo = "{kind}"\nname = "it"\n{STEPS[kind] if keys is None else keys}\n'
        return read_plan(write_plan(tmp_path, text=HEAD + step))
    return read


@pytest.fixture
def ran(plan_of):
    """Water before and after one step, and the step's run."""
    def go(kind, keys=None):
        plan = plan_of(kind, keys)
        train = run_train(stream_of(dict(plan.raw.values))[0], build_steps(plan))
        (passed,) = train.passed
        return passed.before, passed.after, passed
    return go


def gained(before, after):
    """Alkalinity that a step brings. [mg/L as CaCO3]"""
    return (after.alkalinity_eq_l - before.alkalinity_eq_l) * MG_CACO3


def test_every_kind_has_its_plan():
    """A kind that nobody built cannot be shipped."""
    assert set(STEPS) == set(step_kinds())


@pytest.mark.parametrize("kind", STEPS)
def test_every_kind_is_built(plan_of, kind):
    """Under its name and kind, ready to run."""
    (step,) = build_steps(plan_of(kind))
    assert callable(step.run)
    assert (step.name, step.kind) == ("it", kind)


@pytest.mark.parametrize("kind", STEPS)
def test_every_needed_key_is_needed(plan_of, kind):
    """Without it the message says the key, its meaning and an example."""
    for key in [k for k in plan_keys(f"steps.{kind}").values() if k.needed]:
        rest = "\n".join(line for line in STEPS[kind].split("\n") if not line.startswith(f"{key.name} ="))
        assert rest != STEPS[kind], key.name
        with pytest.raises(InputError, match=rf"plan\.toml, line \d+, .*{key.name} is needed .* Add for example {key.name} ="):
            plan_of(kind, rest)


def test_every_choice_of_a_donor_is_known():
    """The list of the keys and that of the builder are one."""
    assert set(DONORS) == set(plan_keys("steps.denitrify")["donor"].choices)


# ---------------------------------------------------------------- each kind by a closed form


def test_coagulate(ran, plan_of):
    """40 mg/L of alum of 14 waters takes 40 x 0.5052 (facts, 1.1); floor and window are those of the plan."""
    before, after, _ = ran("coagulate")
    assert_allclose(gained(before, after), -40.0 * 0.5052, rtol=2e-4)
    (step,) = build_steps(plan_of("coagulate"))
    assert_allclose(step.floor_eq_l * MG_CACO3, 30.0, rtol=1e-4)
    assert step.ph_window == (6.0, 7.2)


def test_chlorinate(ran):
    """Doses count as Cl2. NaOCl brings an equivalent a mole, HOCl that is used up takes one; 0.5 % of caustic in 12 % of NaOCl
    are 0.5 / 12 of its mass."""
    before, after, _ = ran("chlorinate")
    dosed, used = 4.0 / CHLORINE, 1.5 / CHLORINE
    caustic = dosed * 74.44 * (0.5 / 12.0) / NAOH
    assert_allclose(gained(before, after), (dosed + caustic - used) * MG_CACO3, rtol=1e-3)
    assert_allclose(after.total("hypochlorite"), dosed - used, rtol=1e-3)


def test_nitrify(ran, plan_of):
    """7.145 mg as CaCO3 per mg N (facts, check 7); all of 20 mg/L where the plan does not say; its floor is that of the plan."""
    for keys, nitrogen in ((STEPS["nitrify"], 10.0), ("", 20.0)):
        before, after, _ = ran("nitrify", keys)
        assert_allclose(gained(before, after), -7.145 * nitrogen, rtol=2e-4)
        assert_allclose(after.total("ammonium") * NITROGEN, 20.0 - nitrogen, rtol=0, atol=2e-3)
    (step,) = build_steps(plan_of("nitrify"))
    assert_allclose(np.array(step.residual_eq_l) * MG_CACO3, [75.0, 75.0], rtol=1e-4)


@pytest.mark.parametrize(("donor", "per_nitrogen"), [("", 5.0 / 6.0), ('donor = "methanol"', 5.0 / 6.0), ('donor = "none"', 0.0)])
def test_denitrify(ran, donor, per_nitrogen):
    """3.573 mg as CaCO3 per mg N come back; 5 CH3OH + 6 NO3- leave 5 CO2."""
    before, after, _ = ran("denitrify", f"{STEPS['denitrify']}\n{donor}")
    assert_allclose(gained(before, after), 3.573 * 7.0, rtol=2e-4)
    assert_allclose(after.carbon_mol_l - before.carbon_mol_l, per_nitrogen * 7.0 / NITROGEN, rtol=1e-3, atol=1e-12)


def test_aerate(ran):
    """Alkalinity stays; a fifth of the excess of CO2 over air is left at 80 %, none once at air, exp(-kLa t) at most by transfer."""
    before, after, _ = ran("aerate")
    air = before.water().at_air(425.0)
    excess = [w.species_mol_l["CO2"] - air.species_mol_l["CO2"] for w in (before.water(), after.water())]
    assert_allclose(excess[1] / excess[0], 0.2, rtol=1e-3)
    assert_allclose(gained(before, after), 0.0, atol=1e-9)
    _, at_air, _ = ran("aerate", "to_air = true")
    assert_allclose(at_air.water().ph, air.ph, rtol=0, atol=1e-4)
    _, slow, _ = ran("aerate", 'kla = "3 per h"\ntime = "20 min"')  # kLa t = 1
    left = (slow.water().species_mol_l["CO2"] - air.species_mol_l["CO2"]) / excess[0]
    assert np.exp(-1.0) < left < 1.0  # bicarbonate gives some back


def test_air_of_the_plan(ran):
    """Ten times the CO2 of the air: pH one lower in bicarbonate water."""
    _, one, _ = ran("aerate", 'to_air = true\nair_co2 = "400 ppm"')
    _, ten, _ = ran("aerate", 'to_air = true\nair_co2 = "4000 ppm"')
    assert_allclose(one.water().ph - ten.water().ph, 1.0, rtol=0, atol=0.06)


def test_temperature(ran):
    """22 °C, alkalinity kept."""
    before, after, _ = ran("temperature")
    assert_allclose(after.t_c, 22.0)
    assert_allclose(gained(before, after) / MG_CACO3, 0.0, atol=1e-5)  # water expands a little


def test_blend(ran, plan_of):
    """40 % by its share, 2 of 10 ML/d by its flow, the rest of the water before: 0.4 x 10 + 0.2 x 300 + 0.4 x 200 = 144."""
    _, after, _ = ran("blend")
    assert_allclose(after.alkalinity_eq_l * MG_CACO3, 144.0, rtol=1e-4)
    _, own, _ = ran("blend", 'with = ["permeate", "well"]\nshares = ["50 %", "25 %"]')
    assert_allclose(own.alkalinity_eq_l * MG_CACO3, 0.5 * 10.0 + 0.25 * 300.0 + 0.25 * 200.0, rtol=1e-4)
    (step,) = build_steps(plan_of("blend"))
    assert_allclose(step.own_share, 0.4)


@pytest.mark.parametrize(("keys", "alkalinity", "swept"), [
    ('with = ["permeate"]\nshares = ["100 %"]', 10.0, False),
    ('with = ["permeate", "well", "spring"]\nshares = ["33 %", "56 %", "11 %"]', 0.33 * 10 + 0.56 * 300 + 0.11 * 100, True)])
def test_a_blend_without_the_water_before(tmp_path, keys, alkalinity, swept):
    """Shares that add up to the whole, rounding or not; one water alone has no other ratios."""
    text = HEAD + '[sources.spring]\nph = 7.2\ntemperature_c = 15\nalkalinity = "100 mg/L as CaCO3"\n[[steps]]\ndo = "blend"\n' + keys
    plan = read_plan(write_plan(tmp_path, text=text))
    (step,) = build_steps(plan)
    assert (step.own_share, step.with_sweep) == (0.0, swept)
    after = run_train(stream_of(dict(plan.raw.values))[0], [step]).final
    assert_allclose(after.alkalinity_eq_l * MG_CACO3, alkalinity, rtol=1e-4)


def test_soften(ran, plan_of):
    """Lime for CO2 and for the calcium, whose hardness is less than the bicarbonate here: CO2 + Ca a liter, in moles."""
    before, _, passed = ran("soften")
    water = before.water()
    lime = passed.outcome.doses[0].mol_l
    assert water.species_mol_l["HCO3-"][0] > 2.0 * 70.0 / CALCIUM
    assert_allclose(lime, water.species_mol_l["CO2"] + 70.0 / CALCIUM, rtol=0.01)
    (step,) = build_steps(plan_of("soften", 'method = "split"\nlime = "lime"\nmagnesium = "5 mg/L"\nexcess = "1 meq/L"\n'
                                            'noncarbonate_left = "35 mg/L as CaCO3"'))
    assert_allclose([step.magnesium_wanted_mol_l * 24.305e3, step.excess_eq_l, step.noncarbonate_left_eq_l * MG_CACO3],
                    [5.0, 1e-3, 35.0], rtol=1e-4)
    assert step.soda_ash is None


def test_recarbonate(ran, plan_of):
    """To its pH, alkalinity kept, all carbon from the gas; two stages are first and last."""
    before, after, passed = ran("recarbonate")
    assert_allclose(after.water().ph, 7.0, rtol=0, atol=1e-6)
    assert_allclose(after.carbon_mol_l - before.carbon_mol_l, passed.outcome.doses[0].mol_l, rtol=1e-9)
    assert_allclose(gained(before, after), 0.0, atol=1e-9)
    (step,) = build_steps(plan_of("recarbonate", 'product = "gas"\nph = [10.3, 8.6]'))
    assert (step.first_ph, step.to_ph) == (10.3, 8.6)


def test_contact(ran, plan_of):
    """What dissolves brings two equivalents a mole; 15 mg/L of CO2 go in ahead; 6 per h for 15 min is 0.1 per min for 15 min."""
    before, after, passed = ran("contact")
    stone, gas = ({d.product.name: d.mol_l for d in passed.outcome.doses}[n] for n in ("stone", "gas"))
    assert_allclose(gas * 44.009e3, 15.0, rtol=1e-4)
    assert_allclose(after.total("calcium") - before.total("calcium"), stone, rtol=1e-6)
    assert_allclose(gained(before, after), 2.0 * stone * MG_CACO3, rtol=1e-6)
    assert stone > 0.0
    (step,) = build_steps(plan_of("contact", 'product = "stone"\nrate = "6 per h"\ntime = "15 min"'))
    assert_allclose([step.rate_per_min, step.contact_min], [0.1, 15.0])
    assert (step.share, step.carbon_dioxide) == (None, None)


def test_remineralize(ran, plan_of):
    """20 mg/L as CaCO3 of alkalinity are as much limestone; calcium, base and pH reach the step."""
    before, after, _ = ran("remineralize")
    assert_allclose(gained(before, after), 20.0, rtol=1e-3)
    assert_allclose((after.total("calcium") - before.total("calcium")) * 100.086e3, 20.0, rtol=1e-3)
    keys = 'mineral = "lime"\nco2 = "gas"\ncalcium = "80 mg/L"\nbase = "caustic"\nph = 8.3'
    (step,) = build_steps(plan_of("remineralize", keys))
    assert (step.mineral.name, step.base.name, step.to_ph, step.alkalinity_eq_l) == ("lime", "caustic", 8.3, None)
    assert_allclose(step.calcium_mol_l * CALCIUM, 80.0, rtol=1e-4)


def test_fluoridate(ran):
    """0.6 mg/L more fluoride; an equivalent of acid a mole of it, 2.634 mg as CaCO3 per mg F (facts, 1.1)."""
    before, after, _ = ran("fluoridate")
    assert_allclose(after.total("fluoride") * FLUORINE, 0.7, rtol=1e-4)
    assert_allclose(gained(before, after), -2.634 * 0.6, rtol=1e-3)


def test_dose(ran):
    """12 mg/L of product at 50 % is 6 of NaOH, 7.507 mg/L as CaCO3."""
    before, after, _ = ran("dose")
    assert_allclose(gained(before, after), 6.0 * 1.2512, rtol=1e-4)


def test_adjust(ran):
    """Both targets met when the water is computed again; lime brings the alkalinity."""
    before, after, passed = ran("adjust")
    assert_allclose(after.water().ph, 7.9, rtol=0, atol=1e-6)
    assert_allclose(after.alkalinity_eq_l * MG_CACO3, 230.0, rtol=2e-5)
    assert_allclose(2.0 * passed.outcome.doses[0].mol_l, after.alkalinity_eq_l - before.alkalinity_eq_l, rtol=1e-9)


def test_adjust_open_to_air(ran):
    """The pH is that at equilibrium with air; the other targets stay what they are."""
    _, after, _ = ran("adjust", 'products = ["caustic"]\ntarget = { ph = 8.7 }\nopen_to_air = true')
    assert_allclose(after.water().at_air(425.0).ph, 8.7, rtol=0, atol=1e-6)
    assert after.water().ph[0] < 8.6
    _, closed, _ = ran("adjust", 'products = ["caustic"]\ntarget = { alkalinity = "230 mg/L as CaCO3" }\nopen_to_air = true')
    assert_allclose(closed.alkalinity_eq_l * MG_CACO3, 230.0, rtol=2e-5)


# ---------------------------------------------------------------- what does not fit


@pytest.mark.parametrize(("word", "nearest"), [("coagulat", "coagulate"), ("Nitrifie", "nitrify"), ("adjusted", "adjust"), ("blends", "blend")])
def test_an_unknown_kind_names_the_nearest(plan_of, word, nearest):
    """With its line."""
    line = len(HEAD.splitlines()) + 2
    with pytest.raises(InputError, match=rf"plan\.toml, line {line}, \[\[steps\]\] 1: do must be one of .*; found '{word}'\. The nearest is {nearest}\."):
        plan_of(word, "")


@pytest.mark.parametrize(("kind", "keys", "message"), [
    ("chlorinate", 'product = "lime"\ndose = "3 mg/L as Ca(OH)2"', r"needs a product that brings hypochlorite; found 'lime' \(hydrated lime\)"),
    ("coagulate", 'product = "lime"\ndose = "30 mg/L"', r"lime"),
    ("recarbonate", 'product = "lime"\nph = 8.6', r"lime"),
    ("contact", 'product = "lime"', r"lime"),
    ("fluoridate", 'product = "lime"\nfluoride = "0.7 mg/L"', r"lime"),
    ("soften", 'method = "single stage"\nlime = "caustic"', r"caustic"),
    ("remineralize", 'mineral = "caustic"\nco2 = "gas"\nalkalinity = "80 mg/L as CaCO3"', r"caustic"),
])
def test_a_product_that_cannot_do_the_step(plan_of, kind, keys, message):
    """File and line of the step, and the product."""
    line = len(HEAD.splitlines()) + 1
    with pytest.raises(InputError, match=rf"^plan\.toml, line {line}: .*{message}"):
        build_steps(plan_of(kind, keys))


def test_flows_of_sources_that_are_more_than_the_blend(plan_of, tmp_path):
    """40 % and 12 of 10 ML/d."""
    text = HEAD.replace('"2 ML/d"', '"12 ML/d"') + f'[[steps]]\ndo = "blend"\n{STEPS["blend"]}\n'
    with pytest.raises(InputError, match=r"plan\.toml, line \d+: shares of the blend 'blend' must add up to 100 % at most; found 160 %"):
        build_steps(read_plan(write_plan(tmp_path, text=text)))


def test_excess_caustic_without_a_density(plan_of):
    """A share by mass needs it."""
    plan = plan_of("chlorinate")
    spec = plan.steps[0]
    bare = replace(spec.values["product"], density_kg_l=None)
    spec = replace(spec, values={**spec.values, "product": bare})
    with pytest.raises(InputError, match=r"line \d+: step 'it': excess_caustic is a share by mass and needs the density of 'bleach'"):
        build_steps(replace(plan, steps=(spec,)))
