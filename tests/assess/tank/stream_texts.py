"""A small stream file for tests, the tables beside it, and how it is changed and read."""

from aquabuf.assess.tank.job_file import read_stream

STREAM = '''[tank]
name = "Weir Lane"

[wastes.rinse]
temperature = "25 °C"
holds = { "sulfuric acid" = "0.98 g/L" }
solids = "20 mg/L"
flow = "6 m3/h"

[window]
ph = [6.0, 9.0]

[reagents.lye]
is = "caustic soda"
strength = "25 %"

[reagents.vitriol]
is = "sulfuric acid"
strength = "93 %"
'''
TABLES = {
    "curves.csv": "sample_id,base (meq/L),pH\nA,-5,3\nA,0,4\nA,5,5\nA,10,7\nA,15,9\nB,-4,3\nB,0,4.1\nB,4,5\nB,8,7\nB,12,9\nC,-9,3\nC,0,4.2\nC,9,5\nC,18,7\nC,27,9\n",
    "warm.csv": "sample_id,base (meq/L),pH,temperature (°C)\nA,-5,3,30\nA,0,4,30\nA,5,5,30\nA,10,7,30\nA,15,9,30\n",
    "raised.csv": "sample_id,base (meq/L),pH\nA,5,5\nA,10,7\nA,15,9\nA,17,10\nA,19,11\n",
    "falls.csv": "sample_id,base (meq/L),pH\nA,0,4\nA,5,6\nA,10,3\nA,15,9\nA,17,10\n",
    "flows.csv": "time (h),flow (m3/h),strength\n0,4,1\n1,8,0.5\n2,6,2\n",
    "gap.csv": "time (h),flow (m3/h),strength\n0,4,1\n1,8,0.5\n2,8,0.5\n6,6,2\n7,6,2\n",
    "back.csv": "time (h),flow (m3/h),strength\n0,4,1\n1,-8,0.5\n2,6,2\n",
    "mixed.csv": "time (h),flow (m3/h),strength\n0,4,1\n1,8 L/s,0.5\n2,6,2\n",
    "warmth.csv": "time (h),flow (m3/h),strength,temperature (°C)\n0,4,1,20\n1,8,0.5,21\n2,6,2,20\n",
    "half.csv": "time (h),flow (m3/h),strength rinse\n0,4,1\n1,8,0.5\n2,6,0\n",
    "two.csv": "time (h),flow (m3/h),strength rinse,strength wash\n0,4,1,0\n1,8,0.5,0.5\n2,6,0,1\n",
}


def reader(folder):
    """A function that reads a text as the stream file of a folder, with the tables beside it."""
    for name, text in TABLES.items():
        (folder / name).write_text(text, encoding="utf-8")
    path = folder / "s.toml"

    def read(text=STREAM):
        path.write_text(text, encoding="utf-8")
        return read_stream(path)
    return read


def changed(*changes):
    """The stream after (old, new) changes, each found once."""
    text = STREAM
    for old, new in changes:
        assert text.count(old) == 1, old
        text = text.replace(old, new)
    return text


def holds(content, more=""):
    """The stream with these contents, and more keys of the waste."""
    return changed(('{ "sulfuric acid" = "0.98 g/L" }', "{ " + content + " }" + ("\n" + more if more else "")))
