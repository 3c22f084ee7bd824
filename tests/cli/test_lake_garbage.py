"""`aquabuf lake` with whatever comes in: tables that lack much, odd names and files, garbled bytes; what is never lost."""

import csv
import io
import os
import random
import shutil
import sys
import tempfile
from pathlib import Path

import pytest
from click.testing import CliRunner

from aquabuf.cli.main import main

sys.path.insert(0, str(Path(__file__).parents[1] / "report"))

from lake_tables import ALDER, BIRCH, CEDAR, DOCK, SURVEY, ions, series, table_of

QUICK = ("--draws", "0", "--no-figure")


@pytest.fixture
def lake(call, table):
    """Run `aquabuf lake` on a survey without draws and figures into the folder `o`."""
    def go(content=SURVEY, *words, name="t.csv", out="o"):
        return call("lake", table(content, name), "--out", out, *QUICK, *words)
    return go


def rows(name="results.csv", folder="o"):
    """A table of the run as text cells."""
    with (Path(folder) / name).open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


def contents(folder="o"):
    """All bytes by name, hidden files too."""
    return {path.name: path.read_bytes() for path in Path(folder).iterdir()}


# ------------------------------------------------------------------ nothing is lost

def test_an_earlier_result_is_kept(lake):
    """Refused without --force; with it the files of the earlier run go, others stay."""
    lake()
    before = contents()
    done = lake(SURVEY, "--seed", "5")
    assert (done.exit_code, done.stdout) == (1, "")
    assert "o/results.csv exists already and is not overwritten" in done.stderr
    assert "--force" in done.stderr
    assert contents() == before
    Path("o/mine.txt").write_text("notes", encoding="utf-8")
    assert lake(table_of(ALDER), "--force").exit_code == 0
    assert "rejected.csv" not in contents()
    assert contents()["mine.txt"] == b"notes"


BAD = table_of({"sample_id": "x", "anc_ueq_l": "", "ph": 66}, {"sample_id": "y", "anc_ueq_l": "", "ph": ""})


def test_a_run_without_a_lake_takes_nothing_away(lake):
    """Even with --force an earlier result stays to the byte."""
    lake()
    before = contents()
    done = lake(BAD, "--force")
    assert (done.exit_code, done.stdout) == (1, "")
    assert "The earlier result is untouched; use another --out to see the reasons" in done.stderr
    assert contents() == before


def test_only_bad_rows(lake):
    """Exit code 1 with the commonest reason; rejected.csv alone, each row with its remedy; a corrected table may follow."""
    done = lake(BAD)
    assert (done.exit_code, done.stdout) == (1, "")
    assert "no row of t.csv can be assessed; 2 were refused, mostly for " in done.stderr
    assert "rejected.csv in o names each with its remedy" in done.stderr
    assert set(contents()) == {"rejected.csv"}
    assert [(r["row"], r["sample_id"], bool(r["rule"]), bool(r["remedy"])) for r in rows("rejected.csv")] == [("2", "x", True, True), ("3", "y", True, True)]
    assert lake().exit_code == 0


# ------------------------------------------------------------------ tables that cannot be used

CANNOT = [
    ("no file", None, (), "cannot be read: no such file or directory. Check the path"), ("empty", "", (), "t.csv: the file is empty"),
    ("blank lines", "\n\n\n", (), "t.csv: the table has no header line"), ("remarks", "# nothing\n", (), "t.csv: the table has no header line"),
    ("header only", "sample_id,anc_ueq_l\n", (), "the table has a header but no rows. Add at least one row"),
    ("no sample_id", "anc_ueq_l\n5\n", (), "sample_id"), ("unknown header", "sample_id,anc_ueq_l,foo\na,5,1\n", (), "foo"),
    ("header without unit", "sample_id,anc\na,5\n", (), "anc"), ("column twice", "sample_id,anc_ueq_l,anc_ueq_l\na,5,5\n", (), "anc_ueq_l"),
    ("picture", b"\x89PNG\r\n\x1a\n" + bytes(range(256)), (), "must be a text table (CSV), found binary data. Export it as CSV"),
    ("spreadsheet", b"PK\x03\x04" + bytes(100), (), "must be a text table (CSV), found binary data"),
    ("UTF-16", SURVEY.encode("utf-16"), (), "found UTF-16. Save it as UTF-8"), ("open quote", 'sample_id,anc_ueq_l\n"a,5\nb,6\n', (), "Check the quotation marks"),
    ("no event", SURVEY, ("--event", "none.toml"), "file of event water none.toml cannot be read"),
    ("no limits", SURVEY, ("--limits", "none.toml"), "limits file none.toml cannot be read"), ("no map", SURVEY, ("--map", "none.toml"), "none.toml: no such map file"),
    ("no titrations", SURVEY, ("--titrations", "none.csv"), "none.csv cannot be read"), ("survey as event", SURVEY, ("--event", "t.csv"), "t.csv"),
    ("survey as limits", SURVEY, ("--limits", "t.csv"), "t.csv is not valid TOML"), ("survey as map", SURVEY, ("--map", "t.csv"), "t.csv"),
    ("survey as titrations", SURVEY, ("--titrations", "t.csv"), "t.csv: column 'region' is not known"),
    ("wide table as long", SURVEY, ("--map", "wqx"), "the map names headers that the file does not have: 'OrganizationIdentifier'"),
]


@pytest.mark.parametrize(("content", "words", "message"), [c[1:] for c in CANNOT], ids=[c[0] for c in CANNOT])
def test_what_cannot_be_assessed(call, table, content, words, message):
    """Exit code 1, nothing on standard output, one message with the file or rule on standard error, and no folder."""
    if content is not None:
        table(content)
    done = call("lake", "t.csv", "--out", "o", *words, *QUICK)
    assert (done.exit_code, done.stdout) == (1, "")
    assert done.stderr.startswith("Error: ")
    assert message in done.stderr
    assert not Path("o").exists()


@pytest.mark.parametrize("option", ["survey", "--map", "--limits", "--event", "--titrations", "--out"])
def test_a_folder_where_a_file_should_be_and_the_other_way_round(call, table, option):
    """Named in the message."""
    Path("folder").mkdir()
    name = table(SURVEY)
    words = {"survey": ("folder", "--out", "o"), "--out": (name, "--out", name)}.get(option, (name, "--out", "o", option, "folder"))
    done = call("lake", *words, *QUICK)
    assert (done.exit_code, done.stdout) == (1, "")
    assert ("t.csv" if option == "--out" else "folder") in done.stderr


# ------------------------------------------------------------------ tables that lack much

ONLY_IONS = {"sample_id": "a", **ions(60, 20, 30, 5, 2, 50, 5, 25)}
LACKING = {
    "only ANC": ({"sample_id": "a", "anc_ueq_l": 40}, "prone to turn acid", "Gran ANC (method unstated)"),
    "only alkalinity": ({"sample_id": "a", "alkalinity_mg_l_caco3": 8}, "sensitive", "alkalinity (method unstated)"),
    "only ions": (ONLY_IONS, "prone to turn acid", "charge balance"),
    "no pH": ({k: v for k, v in ALDER.items() if k != "ph"}, "sensitive", "Gran ANC"),
    "no temperature": ({k: v for k, v in ALDER.items() if k != "temperature_c"}, "sensitive", "Gran ANC"),
    "only pH": ({"sample_id": "a", "ph": 5.1}, "", ""),
}


@pytest.mark.parametrize(("row", "named", "rests_on"), LACKING.values(), ids=LACKING)
def test_a_lake_that_lacks_much(lake, row, named, rests_on):
    """What can be told is told, what cannot is blank, and the column left_out says what would bring it."""
    done = lake(table_of(row))
    assert done.exit_code == 0, done.stderr
    (r,) = rows()
    assert (r["class"], r["anc_used_from"], r["status"]) == (named, rests_on, "partial")
    if "ph" not in row or "temperature_c" not in row:
        assert r["acid_to_ph_6_0_ueq_l"] == r["dic_umol_l"] == r["pco2_uatm"] == ""
        assert "closed tolerance (give " in r["left_out"]
    if "temperature_c" not in row:
        assert r["ph_at_air"] == r["acid_to_ph_6_0_open_ueq_l"] == ""
        assert "pH at air (give temperature" in r["left_out"]
    if "calcium_ueq_l" not in row:
        assert r["anc_charge_ueq_l"] == r["ion_balance_percent"] == r["critical_load_meq_m2_yr"] == ""
        assert "charge-balance ANC (give calcium, magnesium, sodium, potassium, sulfate, nitrate, chloride)" in r["left_out"]
    assert not [k for k, v in r.items() if v in ("nan", "inf", "-inf")]


def test_a_missing_ion_is_never_taken_as_zero(lake):
    """No charge balance, the ion named, and no class from what is left."""
    lake(table_of({k: v for k, v in ONLY_IONS.items() if k != "potassium_ueq_l"} | {"ph": 6}))
    (r,) = rows()
    assert (r["anc_charge_ueq_l"], r["missing_ions"], r["class"]) == ("", "potassium", "")


def test_one_column_of_numbers_after_another_is_taken_away(lake):
    """Whichever single column a survey lacks, each lake has its row or its refusal."""
    names = [name for name in ALDER if name != "sample_id"]
    for name in names:
        done = lake(table_of(*({k: v for k, v in row.items() if k != name} for row in (ALDER, BIRCH, CEDAR, DOCK))), "--force")
        assert done.exit_code == 0, (name, done.stderr)
        refused = rows("rejected.csv") if Path("o/rejected.csv").exists() else []
        assert len(rows()) + len(refused) == 4, name


@pytest.mark.parametrize("column", ["conductivity_us_cm", "dic_mg_l_c", "sulfur_deposition_meq_m2_yr", "runoff_m_yr", "doc_mg_l", "wind_speed_m_s"])
def test_the_smallest_numbers(lake, column):
    """A number below 1e-308 is as good as zero, or refused: no warning of the machine."""
    row = {"sample_id": "a", "temperature_c": 10, "ph": 6.5, "anc_ueq_l": 60, **ions(70, 20, 30, 5, 2, 40, 5, 20), "dic_mg_l_c": 1, "doc_mg_l": 2,
           "conductivity_us_cm": 15, "runoff_m_yr": 0.7, "residence_time_yr": 0.5, "sulfur_deposition_meq_m2_yr": 40, "wind_speed_m_s": 3}
    for tiny in ("1e-310", "1e-320"):
        assert lake(table_of({**row, column: tiny}), "--force").exit_code in (0, 1)


# ------------------------------------------------------------------ how tables are written

def test_semicolons_decimal_commas_and_marks_of_other_systems(lake):
    """Byte order mark, line ends of Windows: the same lakes as with points and commas."""
    lake(out="points")
    done = lake(b"\xef\xbb\xbf" + SURVEY.replace(",", ";").replace(".", ",").replace("\n", "\r\n").encode(), out="commas")
    assert done.exit_code == 0, done.stderr
    assert contents("points")["results.csv"] == contents("commas")["results.csv"]


NAMES = ['=HYPERLINK("http://x.invalid","y")', "../../x", "/etc/passwd", "C:\\x", "n" * 500, "a,b", 'say "so"', "таёжное", "lakes.csv", "@sum", "0", "two\nlines"]


def test_odd_names(lake, tmp_path):
    """A name is a name: it comes back as it was, never becomes a file, and breaks no line of the texts."""
    done = lake(table_of(*({**row, "sample_id": name, "site": name, "region": name}
                           for name, row in zip(NAMES, (ALDER, CEDAR, DOCK) * 4, strict=True))))
    assert done.exit_code == 0, done.stderr
    for name in ("results.csv", "classes.csv", "verdicts.csv", "episodes.csv", "liming.csv", "checks.csv"):
        assert {r["sample_id"] for r in rows(name)} - {"(all rows)"} <= set(NAMES), name
    assert [r["sample_id"] for r in rows()] == NAMES
    assert sorted(p.name for p in tmp_path.iterdir()) == ["o", "t.csv"]
    report = Path("o/report.txt").read_text(encoding="utf-8").splitlines()
    assert not [line for line in report if line.startswith("lines")]


# ------------------------------------------------------------------ garbled bytes

BASE = table_of(ALDER, BIRCH, CEDAR, DOCK, *series("Fir", (10, 20, 30, 25), (50, 40, 30, 35), ph=6.2)).encode()
TOKENS = [t.encode() for t in (
    ",", "\n", "\r\n", "\r", '"', '""', ";", "\t", "#", "nan", "inf", "-inf", "1e308", "-1e308", "1e-320", "1e999", "<", "<5", ">9", "µ", "-", "+", ".", "e",
    "0", "99999", "2024-02-30", "31.12.2024", " ", "=1+1", "−", "\u2028", "\x0b", "\x0c", "\x1b[0m", "\x85", "mg/L", "_u", "sample_id")]
TOKENS += [b"\xb5", b"\xff", b"\xef\xbb\xbf", b"\x00"]
CHOICES = [(), ("--scheme", "sweden_ph", "--scheme", "norway_20"), ("--anc-limit", "variable", "--critical-load", "flux original"),
           ("--lime-ph", "6.5", "--no-ammonium", "--by", "site"), ("--organic", "oliver", "--lime", "quicklime", "--wind-relation", "vachon_prairie")]
CASES = int(os.environ.get("AQUABUF_FUZZ_CASES", "80"))


def garbled(rng, content):
    """The bytes with one to six of them changed, taken out, put in or doubled, or cut off."""
    out = bytearray(content)
    for _ in range(rng.randint(1, 6)):
        what, at = rng.random(), rng.randrange(len(out) + 1)
        if what < 0.25 and at < len(out):
            out[at] = rng.choice(b"0123456789.,-") if rng.random() < 0.7 else rng.randrange(256)
        elif what < 0.40:
            del out[at:at + rng.choice((1, 1, 2, 5, 40))]
        elif what < 0.85:
            out[at:at] = rng.choice(TOKENS)
        elif what < 0.95:
            start = rng.randrange(len(out) + 1)
            out[at:at] = out[start:start + rng.choice((1, 5, 30, 200))]
        else:
            del out[at:]
    return bytes(out)


def rows_in(content):
    """Records below the header, counted with the csv module; None where they cannot be told apart."""
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError:
        text = content.decode("latin-1")
    lines = [line for line in io.StringIO(text, newline="") if not line.startswith("#")]
    try:
        return sum(any(record) for record in csv.reader(lines, strict=True)) - 1
    except csv.Error:
        return None


def verdict_on(content, *words):
    """Exit code, and what is wrong with the outcome of a run on these bytes; raises what should not have come up."""
    folder = Path(tempfile.mkdtemp())
    try:
        (folder / "t.csv").write_bytes(content)
        done = CliRunner().invoke(main, ["lake", str(folder / "t.csv"), "--out", str(folder / "o"), *QUICK, *words])
        if done.exception is not None and not isinstance(done.exception, SystemExit):
            raise done.exception
        left = {p.name for p in (folder / "o").glob("*")}
        wrong = []
        if done.exit_code not in (0, 1) or (done.exit_code == 1 and (done.stdout or not done.stderr.startswith("Error: "))):
            wrong.append("exit code or streams")
        if done.exit_code == 1 and left - {"rejected.csv"}:
            wrong.append(f"left {left}")
        if left:
            good = [r["row"] for r in rows(folder=folder / "o")] if "results.csv" in left else []
            bad = {r["row"] for r in rows("rejected.csv", folder / "o")} if "rejected.csv" in left else set()
            if set(good) & bad or len(set(good)) != len(good) or len(good) + len(bad) != rows_in(content):
                wrong.append(f"{len(good)} rows and {len(bad)} refused of {rows_in(content)}")
            if good != sorted(good, key=int):
                wrong.append("order")
        return done.exit_code, wrong
    finally:
        shutil.rmtree(folder)


def test_garbled_bytes(monkeypatch):
    """Never an exception that nobody meant, never a lost row; AQUABUF_FUZZ_CASES sets how many tables are tried."""
    monkeypatch.setenv("AQUABUF_TRACEBACK", "1")
    header, _, body = BASE.partition(b"\n")
    codes = {0: 0, 1: 0}
    for seed in range(CASES):
        rng = random.Random(seed)
        content = garbled(rng, BASE) if seed % 4 == 0 else header + b"\n" + garbled(rng, body)
        draws = ("--draws", "100") if seed % 10 == 0 else ()
        code, wrong = verdict_on(content, *rng.choice(CHOICES), *draws)
        assert not wrong, (seed, wrong, content)
        codes[code] += 1
    assert min(codes.values()) > CASES // 10  # both ways out are met


CELLS = ("", "0", "-0", "-1", "1e308", "1e-320", "1e-30", "inf", "nan", "99999", "14", "-5", "<0.1", "<1e6", "0.0001", "1e5", "1e7", "50", "yes", "gran", "end_point",
         "charge_balance", "open_bottle", "1900-01-01", "2024-02-30", "a" * 300, "=1+1", "12", "-20")


def test_garbled_cells(monkeypatch):
    """Extreme or senseless values in any cell: a row is assessed or refused, with no warning of the machine and nothing infinite."""
    monkeypatch.setenv("AQUABUF_TRACEBACK", "1")
    header, *lines = csv.reader(io.StringIO(BASE.decode()))
    for seed in range(CASES // 2):
        rng = random.Random(seed)
        table = [list(line) for line in lines]
        for line in table:
            for _ in range(rng.randint(0, 4)):
                line[rng.randrange(1, len(header))] = rng.choice(CELLS)
        stream = io.StringIO()
        csv.writer(stream, lineterminator="\n").writerows([header, *table])
        _, wrong = verdict_on(stream.getvalue().encode(), *rng.choice(CHOICES))
        assert not wrong, (seed, wrong, stream.getvalue())
