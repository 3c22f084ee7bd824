"""Damaged stream files: whatever is wrong, the program says so in its own words, and does not hang."""

import random
import re
import shutil
import signal
from pathlib import Path

import pytest

from aquabuf.assess.tank.arrivals import statistics_of
from aquabuf.assess.tank.job_file import read_stream
from aquabuf.assess.tank.waste import chemistry
from aquabuf.errors import AquabufError
from aquabuf.tables import read_table

DATA = Path(__file__).parents[3] / "field_data"
FILES = ("stream_dairy.toml", "stream_plating.toml", "stream_regeneration.toml", "stream_seep.toml")
VALUES = ("3", "-3", "0", "1e308", "-1e-308", "nan", "inf", "true", '""', '" "', '"3"', '"-3 mg/L"', '"1e308 mg/L"', '"1e-320 %"', '"9e299 m3/h"',
          '"0 %"', '"3 mg/L as Qq"', '"20 mol/L"', '"0 g/L"', '"0.5 N"', "[]", "[1]", "[6.0, 9.0]", "[[]]", '["a", 3]', "{}", "{ a = 1 }",
          '{ zinc = "1 g/L" }', '{ "sulfuric acid" = "1900 g/L" }', '{ acetate = "9 mol/L" }', "2026-01-01", "07:30:00", "9" * 320, '"all"', '"lime"',
          '"own"', '"\\u0000"', '"../../x"', '"dairy_titration.csv"', '"stream_seep.toml"', '"é"', "'''a\nb'''", '"%"', '"' + "x" * 400 + '"', "15", "-1")
WORDS = sorted({row[cell] for row in read_table("stream_keys") for cell in ("key", "example") if row[cell]})
LONGEST_S = 20


def damaged(text, rng):
    """A text after one to three random changes of its lines."""
    lines = text.splitlines()
    for _ in range(rng.randrange(1, 4)):
        at, other = rng.randrange(len(lines)), rng.randrange(len(lines))
        kind = rng.randrange(9)
        if kind == 0:
            del lines[at]
        elif kind == 1:
            lines[at], lines[other] = lines[other], lines[at]
        elif kind == 2 and "=" in lines[at]:
            lines[at] = lines[at].split("=")[0] + "= " + rng.choice(VALUES)
        elif kind == 3 and "=" in lines[at] and "=" in lines[other]:
            lines[at] = lines[at].split("=", 1)[0] + "=" + lines[other].split("=", 1)[1]
        elif kind == 4 and "=" in lines[at]:
            lines[at] = rng.choice(WORDS) + " = " + lines[at].split("=", 1)[1]
        elif kind == 5 and lines[at]:
            cut = rng.randrange(len(lines[at]))
            lines[at] = lines[at][:cut] + rng.choice(["", "x", '"', "-", "0", "%", "[", "= ", "\x00", "é"]) + lines[at][cut + 1:]
        elif kind == 6:
            lines.insert(at, f"{rng.choice(WORDS)} = {rng.choice((*VALUES, *WORDS))}")
        elif kind == 7:
            lines[at] = re.sub(r'"[^"]*"', lambda m: rng.choice((m[0], rng.choice([v for v in VALUES if v.startswith('"')]))), lines[at])
        else:
            lines[at] = re.sub(r"[\d.]+", lambda m: rng.choice(["-1", "1e6", "0", "1e-9", m[0]]), lines[at])
        lines = "\n".join(lines).splitlines() or [""]
    return "\n".join(lines) + "\n"


@pytest.fixture
def outcome(tmp_path):
    """What a stream of these bytes brings: "" where it is read and its chemistry made, else the message."""
    shutil.copy(DATA / "dairy_titration.csv", tmp_path)
    path = tmp_path / "s.toml"

    def late(*_):
        raise AssertionError("reading hangs")

    def of(content):
        path.write_bytes(content)
        signal.alarm(LONGEST_S)
        try:
            job = read_stream(path)
            statistics_of(job.arrivals, 1.0)
            chemistry(job.wastes)
        except AquabufError as error:
            return str(error)
        finally:
            signal.alarm(0)
        return ""

    before = signal.signal(signal.SIGALRM, late)
    yield of
    signal.signal(signal.SIGALRM, before)


@pytest.mark.parametrize("name", FILES)
def test_undamaged(outcome, name):
    """The files that are damaged below are good ones."""
    assert outcome((DATA / name).read_bytes()) == ""


@pytest.mark.parametrize("name", FILES)
@pytest.mark.parametrize("seed", range(2))
def test_random_damage(outcome, name, seed):
    """Only errors of this program; many files are still read, many refused, for many reasons."""
    rng = random.Random(f"{name}{seed}")
    text = (DATA / name).read_text(encoding="utf-8")
    found = [outcome(damaged(text, rng).encode()) for _ in range(75)]
    refused = [message for message in found if message]
    assert [m for m in refused if not m.startswith(("s.toml", "waste ", "the temperature of the mixture", "flow must", "most must"))] == []
    assert 10 < len(refused) < 74
    assert len({re.sub(r"\W", "", m.split(":", 1)[-1])[:40] for m in refused}) > 8


@pytest.mark.parametrize("name", FILES)
def test_damaged_bytes(outcome, name):
    """Bytes changed, cut off or doubled: files that are no text are told so."""
    rng = random.Random(name)
    content = (DATA / name).read_bytes()
    for _ in range(40):
        at, kind = rng.randrange(len(content)), rng.randrange(3)
        bad = content[:at] + (bytes([rng.randrange(256)]) + content[at + 1:] if kind == 0 else b"" if kind == 1 else content[at - 40:])
        message = outcome(bad)
        assert not message or message.startswith(("s.toml", "the stream file s.toml", "waste ", "the temperature", "flow must", "most must"))


def test_every_value_at_every_key(outcome):
    """Each key of a file with a few odd values."""
    rng = random.Random(3)
    for name in FILES[:2]:
        lines = (DATA / name).read_text(encoding="utf-8").splitlines()
        for at, line in enumerate(lines):
            if "=" in line:
                for value in rng.sample(VALUES, 3):
                    message = outcome("\n".join([*lines[:at], line.split("=")[0] + "= " + value, *lines[at + 1:]]).encode())
                    assert not message or message.startswith(("s.toml", "waste ", "the temperature")), f"{line} {value}: {message}"
