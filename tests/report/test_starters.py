"""Starter files: every kind can be read and assessed as it is; the limits file repeats the shipped limits."""

import tomllib

import pytest

from aquabuf.assess.limits import shipped_limits
from aquabuf.assess.limits_file import read_limits
from aquabuf.assess.options import Options
from aquabuf.assess.sample.columns import limit_quantities
from aquabuf.assess.titration.options import TitrationOptions
from aquabuf.errors import InputError
from aquabuf.readings.template import template_kinds
from aquabuf.readings.titration.paths import TitrationFiles
from aquabuf.report.starters import TITRATION_KINDS, starter
from aquabuf.report.titration_run import titrate_file

TABLES = [kind for kind in template_kinds() if kind != "map"]
QUANTITIES = limit_quantities(Options())


@pytest.mark.parametrize("kind", TABLES)
def test_starter_table_can_be_assessed(run, kind):
    """Both invented rows come out, none is refused."""
    words, _ = run(starter(kind))
    assert words.startswith("waters.csv: 2 samples assessed")
    assert "0 rows refused" in words


def test_unknown_kind_names_those_there_are():
    """The user learns what to ask for."""
    with pytest.raises(InputError, match=r"no starter file is named 'pond'. Use one of: lake, stream, .*map, limits"):
        starter("pond")


def test_limits_starter_changes_nothing_as_it_is(tmp_path):
    """Everything is a remark until the user takes the # away."""
    path = tmp_path / "limits.toml"
    path.write_text(starter("limits"), encoding="utf-8")
    assert read_limits(path, QUANTITIES) == shipped_limits()


def test_limits_starter_holds_every_number():
    """Limit, floor, group, waters and words of each shipped limit stand behind its #."""
    text = "\n".join(line.removeprefix("#") for line in starter("limits").splitlines() if not line.startswith("# "))
    found = tomllib.loads(text)["limits"]
    assert list(found) == [x.name for x in shipped_limits()]
    for x in shipped_limits():
        entry = found[x.name]
        assert (entry["limit"], entry.get("lower", float("-inf")), entry["group"]) == (x.limit, x.lower, x.group)
        assert (tuple(entry["kinds"]), tuple(entry["regimes"]), entry["words"]) == (x.kinds, x.regimes, x.words)


def test_limits_starter_repeats_the_shipped_limits(tmp_path):
    """With every # of an entry taken away, the same limits come out."""
    text = "\n".join(line.removeprefix("#") for line in starter("limits").splitlines() if not line.startswith("# "))
    path = tmp_path / "limits.toml"
    path.write_text(text, encoding="utf-8")
    assert read_limits(path, QUANTITIES) == shipped_limits()


def test_starter_titrations_can_be_assessed(table, tmp_path):
    """Both invented titrations come out without a warning: dilute by the Gran line, ordinary by the fit."""
    files = TitrationFiles(*(table(starter(kind), f"{kind}.csv") for kind in TITRATION_KINDS))
    words = titrate_file(files, tmp_path / "out", TitrationOptions(), figures=0)
    assert words.startswith("titration_points.csv: 2 titrations, 2 with a result (0 of them with a warning), 0 without, 0 refused.")
    assert [line.split()[-1] for line in words.splitlines() if line.startswith("  P")] == ["gran", "fit"]


def test_starter_titrations_say_what_each_column_is():
    """Each column of a starter stands in the remarks above it, with its unit where it has one."""
    for kind in TITRATION_KINDS:
        lines = starter(kind).splitlines()
        remarks = " ".join(line for line in lines if line.startswith("#"))
        header = next(line for line in lines if not line.startswith("#"))
        assert all(name in remarks for name in header.split(",")), kind
