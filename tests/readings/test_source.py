"""One way in for wide and long tables: the map tells which."""

import pytest

from aquabuf.errors import FileError, InputError
from aquabuf.readings.long.mapping import LongMap
from aquabuf.readings.long.shipped import shipped_map
from aquabuf.readings.mapping import TableMap
from aquabuf.readings.result import join_readings
from aquabuf.readings.source import load_map, open_any, resolve_map

LONG = '[long]\nsample_id = "S"\ncharacteristic = "P"\nvalue = "V"\n[characteristics]\n"acidity" = "ph"\n'


def ph_of(path, mapping=None, **more):
    """Names and pH of a table."""
    frame = join_readings(open_any(path, mapping, **more)).frame
    return frame[["sample_id", "ph"]].values.tolist()


def test_the_map_tells_the_kind_of_table(table):
    """No map and a map of headers are for wide tables; a section [long] is for long ones."""
    wide, long = table("sample_id,ph,x\na,7,8\n", "w.csv"), table("S,P,V\na,acidity,7\n", "l.csv")
    wide_map = table('[columns]\n"x" = "ignore"\n', "w.toml")
    long_map = table(LONG, "l.toml")
    assert isinstance(load_map(wide_map), TableMap)
    assert isinstance(load_map(long_map), LongMap)
    assert ph_of(wide, wide_map) == ph_of(wide, str(wide_map)) == ph_of(wide, load_map(wide_map)) == [["a", 7]]
    assert ph_of(long, long_map) == ph_of(long, str(long_map)) == ph_of(long, load_map(long_map)) == [["a", 7]]
    assert ph_of(table("sample_id,ph\na,7\n")) == [["a", 7]]


def test_a_shipped_map_by_its_name(tmp_path, monkeypatch):
    """A name is a shipped map; a file of that name is meant by its path."""
    assert resolve_map("wqx") == shipped_map("wqx")
    monkeypatch.chdir(tmp_path)
    (tmp_path / "wqx").write_text(LONG, encoding="utf-8")
    assert resolve_map("wqx") == shipped_map("wqx")
    assert resolve_map("./wqx").resolve() == tmp_path / "wqx"
    assert load_map(tmp_path / "wqx").sample_id == ("S",)


def test_a_map_that_is_not_there(table):
    """At once, before a table is opened, with the names that there are."""
    with pytest.raises(FileError, match=r"wqy: no such map file\. .*shipped maps are wqx, wqx_visit\."):
        open_any(table("sample_id,ph\na,7\n"), "wqy")


@pytest.mark.parametrize("mapping", ["wqx", None])
def test_chunk_rows_must_be_positive(table, mapping):
    """The same rule for both kinds."""
    with pytest.raises(InputError, match=r"chunk_rows must be 1 or more; found 0"):
        next(open_any(table("sample_id,ph\na,7\n"), mapping, chunk_rows=0))
