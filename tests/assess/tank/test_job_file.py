"""Stream files: what a file becomes in house units, with every assumption; wastes are in test_job_wastes.py."""

import pytest
from numpy.testing import assert_allclose
from stream_texts import STREAM, changed, reader

from aquabuf.assess.tank.job_file import SECTIONS
from aquabuf.tables import read_table


@pytest.fixture
def read(tmp_path):
    """Reads a text as a stream file."""
    return reader(tmp_path)


def test_a_plain_stream(read):
    """House units: flow m3/h, equivalents by hand: 0.98 g/L of 98.079 g/mol, two each."""
    job = read()
    assert (job.name, job.file, job.base, job.acid, job.profile, job.notes) == ("Weir Lane", "s.toml", None, None, None, ())
    (rinse,) = job.wastes
    assert_allclose([rinse.base_eq_l, rinse.t_c, rinse.solids_g_l], [-2 * 0.98 / 98.079, 25.0, 0.02], rtol=1e-4)
    assert job.arrivals[0].mean_m3_h == 6.0
    assert (job.window.low, job.window.high, job.window.aim) == (6.0, 9.0, None)
    assert list(job.reagents) == ["lye", "vitriol"]
    assert [r.kind for r in job.reagents.values()] == ["base", "acid"]


def test_defaults_are_those_of_the_list_and_all_are_told(read):
    """Each default of the list of keys that the file leaves out stands among the assumptions, as the list has it."""
    said = read().assumptions
    for row in read_table("stream_keys"):
        if row["section"] in ("window", "site", "layout", "simulate") and row["default"]:
            assert f"[{row['section']}]: {row['key']} = {row['default']}, as the file does not say" in said, row["key"]
    assert not [a for a in said if "plan" in a]


def test_time_rule_of_the_default(read):
    """446 min a month and 60 min each: 40 CFR 401.17 (recalled in facts, step 2); 446 min is 0.999 % of 31 days."""
    window = read().window
    assert (window.total_min, window.each_min) == (446.0, 60.0)
    assert_allclose(window.total_min / (31 * 24 * 60), 0.00999, rtol=1e-3)
    assert "401.17" in window.time_source
    own = read(changed(("[window]", "[window]\ntotal = \"90 min\"\nsource = \"our permit\""))).window
    assert (own.source, own.time_source, own.total_min) == ("our permit", "our permit", 90.0)
    told = read(changed(("[window]", "[window]\nsource = \"our permit\""))).window
    assert "401.17" in told.time_source  # a permit that names no time rule is not its source


def test_every_key_has_its_place(read):
    """Head, window, site, layout and simulation with each key set, in units of its own."""
    job = read(changed(('"Weir Lane"', '"Weir Lane"\ndate = 2026-03-14\nnote = "first"\ncurrency = "EUR"'),
                       ("ph = [6.0, 9.0]", 'ph = [6.0, 9.0]\naim = 7.5\ntotal = "2 h"\neach = "90 s"\nsource = "permit"'))
               + '''[use]
base = "lye"
acid = "vitriol"
[site]
depth = "120 in"
feed_error = 0.02
resolution = "0.5 %"
turndown = 50
line = "2 m"
line_bore = "1 in"
probe_lag = "0.5 min"
probe_noise = 0.01
outlet_limit = "104 °F"
storage = "21 d"
containment = "Largest and rain"
[layout]
volumes = ["3 m3", "6000 L"]
set_points = [5.0, 7.5]
equalization = "60 m3"
control = "ph"
feedforward = false
[simulate]
days = "12 h"
step = "2 s"
cases = 0
seed = 7
buffer_spread = "10 %"
probe_offset = 0.2
'''.replace("0.02\n", '"2 %"\n'))
    assert (job.date, job.note, job.currency, job.base, job.acid) == ("2026-03-14", "first", "EUR", "lye", "vitriol")
    w = job.window
    assert (w.aim, w.total_min, w.each_min, w.source) == (7.5, 120.0, 1.5, "permit")
    s = job.site
    assert_allclose([s.depth_m, s.feed_error, s.resolution, s.turndown, s.line_m, s.line_bore_mm, s.probe_lag_s,
                     s.probe_noise_ph, s.outlet_limit_c, s.storage_d],
                    [3.048, 0.02, 0.005, 50.0, 2.0, 25.4, 30.0, 0.01, 40.0, 21.0], rtol=1e-9)
    assert s.containment == "largest and rain"
    assert (job.wishes.stages, job.wishes.set_points, job.wishes.axis, job.wishes.feedforward) == (2, (5.0, 7.5), "ph", False)
    assert_allclose([*job.wishes.volumes_m3, job.wishes.equalization_m3], [3.0, 6.0, 60.0])
    t = job.trial
    assert_allclose([t.days, t.step_s, t.cases, t.seed, t.buffer_sd, t.probe_offset_sd], [0.5, 2.0, 0, 7, 0.1, 0.2])


def test_reagents_of_the_file(read):
    """Keys of a product and of a neutralization together; a rate per hour becomes one per minute."""
    job = read(changed(("[reagents.vitriol]", '[reagents.lime]\nis = "hydrated lime"\nstrength = "92 %"\nefficiency = "90 %"\n'
                        'residence = "25 min"\ndissolves = "6 per h"\nprice = "0.2 per kg"\n[reagents.vitriol]')))
    lime = job.reagents["lime"]
    assert_allclose([lime.efficiency, lime.dissolution_per_min, lime.stock.price_per_kg], [0.9, 0.1, 0.2])
    assert dict(job.residence_min) == {"lime": 25.0}
    said = [a for a in job.assumptions if a.startswith("[reagents.lime]")]
    assert len(said) == 1  # all but the slurry was given
    assert "fed as" in said[0]
    assert "made up on site" in said[0]


def test_reagent_table_is_told(read):
    """Efficiency and rate of dissolution that were not given, with their source."""
    job = read(changed(("[reagents.vitriol]", '[reagents.lime]\nis = "hydrated lime"\nstrength = "92 %"\n[reagents.vitriol]')))
    said = [a for a in job.assumptions if a.startswith("[reagents.lime]")]
    assert any("92 % of its equivalents react (mining practice" in a for a in said)
    assert any("dissolves at 13.8 per h, the rate of the reagents table" in a for a in said)
    dry = read(changed(("[reagents.vitriol]", '[reagents.lime]\nis = "hydrated lime"\nstrength = "92 %"\ndry = true\n[reagents.vitriol]')))
    assert dry.reagents["lime"].fed_as != job.reagents["lime"].fed_as
    assert not any("made up on site" in a for a in dry.assumptions)


def test_profile(read):
    """The table beside the file; short ones are repeated, which is told; statistics that it makes idle are noted."""
    job = read(changed(('flow = "6 m3/h"', 'least = "1 m3/h"\nflow = "6 m3/h"')) + '[profile]\nfile = "flows.csv"\n')
    assert_allclose(job.profile.flow_m3_h, [4.0, 8.0, 6.0])
    assert "[profile]: its 0.125 days are repeated over the 2 days of the simulation" in job.assumptions
    assert "[wastes.rinse]: least left aside, as [profile] has the flow over time" in job.notes
    varied = read(changed(('flow = "6 m3/h"', 'flow = "6 m3/h"\nstrength = { spread = "20 %" }')) + '[profile]\nfile = "flows.csv"\n')
    assert "[wastes.rinse]: its spread comes on top of the strengths of [profile]" in varied.assumptions
    assert "its strength stays as stated but for [profile]" in "".join(job.assumptions)
    assert '[profile]: hold_gaps = "0 h", as the file does not say' in job.assumptions


def test_profile_without_mean_flow_and_with_gaps(read):
    """A profile replaces the flow; three hours may be held; its temperature is not followed."""
    job = read(changed(('flow = "6 m3/h"\n', "")) + '[profile]\nfile = "gap.csv"\nhold_gaps = "3 h"\n')
    assert job.arrivals[0].mean_m3_h is None
    assert any("1 x rows missing, held at the value before" in n for n in job.notes)
    warm = read(STREAM + '[profile]\nfile = "warmth.csv"\n')
    assert any("its temperature is not followed" in n for n in warm.notes)


def test_sections_are_those_of_the_list():
    """Every section of the list of keys is a table of the file, or within one."""
    assert {row["section"].partition(".")[0] for row in read_table("stream_keys")} == set(SECTIONS)


def test_a_byte_order_mark_is_no_mistake(tmp_path):
    """Editors write one."""
    assert reader(tmp_path)("\ufeff" + STREAM).name == "Weir Lane"
