"""Lines of tables and keys: texts in which every number is the number of its own line, read by the standard library."""

import random
import tomllib

import pytest

from aquabuf.assess.plant.toml_lines import toml_lines

WRITTEN = '''# a comment with = and [brackets]
plain = @
"quoted key" = @   # = 99 [no]
'single [quoted]' = @
dotted.inner = @
dotted . "other key" = @

[table]
a = @
  indented = @
[table."sub table"]
b = @
text = """
[no_table]
no_key = 99
""" # over
after = @
literal = \'\'\'
also_no = 99 \'\'\'
after_literal = @
tricky = "a \\" ] } # , = 99"
after_tricky = @
inline = { x = @, y = { z = @, "q r" = @ }, t = "}" , u = @ }
listed = [
  @, # [ ]
  @, @ , "]" ,

  [ @ ],
  { k = @,  l = [@, @] },
]
after_list = @
quotes = """end with two quotes"""""
after_quotes = @
day = 2026-03-14
stamp = 2026-03-14 07:30:00
after_day = @

[[steps]]
do = @
[[steps]]
do = @
more = { p = @ }
[steps.of_second]
deep = @
[[steps.inner]]
n = @
[[steps.inner]]
n = @
[[steps]]
do = @
[later.table]
v = @
[later]
w = @
"escaped \\u00e9 \\" quote" = @
127 = @
-_- = @
'''
SHAPES = "".join(line.replace("@", str(n)) for n, line in enumerate(WRITTEN.splitlines(keepends=True), start=1))


def leaves(value, path=()):
    """Every path of a parsed text and what stands there."""
    if isinstance(value, dict | list):
        for key, inner in value.items() if isinstance(value, dict) else enumerate(value):
            yield (*path, key), inner
            yield from leaves(inner, (*path, key))


def wrong(text):
    """Numbers whose line is not the one they name, and paths that were not found."""
    lines = toml_lines(text)
    found = lines.paths()
    return [(path, value, found.get(path)) for path, value in leaves(tomllib.loads(text))
            if path not in found or (isinstance(value, int) and not isinstance(value, bool) and value != 99 and found[path] != value)]


def test_every_shape_of_key():
    """Dotted, quoted, inline, nested, after multi-line strings and lists, in arrays of tables."""
    numbers = [value for _, value in leaves(tomllib.loads(SHAPES)) if isinstance(value, int)]
    assert len(numbers) == WRITTEN.count("@") == 37
    assert wrong(SHAPES) == []
    assert wrong(SHAPES.replace("\n", "\r\n")) == []


def test_no_path_is_made_up():
    """Brackets and equal signs in comments and strings are not keys."""
    real = {path for path, _ in leaves(tomllib.loads(SHAPES))}
    assert set(toml_lines(SHAPES).paths()) == real


def test_headers_have_the_line_of_their_header():
    """Tables, arrays of tables and their elements; a table opened by one below it keeps the line of its own header."""
    lines = toml_lines(SHAPES)
    at = [0, *SHAPES.splitlines()]
    steps = [n for n, line in enumerate(at) if line == "[[steps]]"]
    expected = {("steps", n): line for n, line in enumerate(steps)} | {("steps",): steps[0], ("dotted",): 5}
    expected |= {path: at.index(header) for path, header in (
        (("table",), "[table]"), (("table", "sub table"), '[table."sub table"]'), (("steps", 1, "of_second"), "[steps.of_second]"),
        (("steps", 1, "inner", 0), "[[steps.inner]]"), (("later",), "[later]"), (("later", "table"), "[later.table]"))}
    assert len(expected) == 11
    assert {path: lines.of(path) for path in expected} == expected


def test_what_is_not_there_has_the_line_of_what_holds_it():
    """A missing key is looked for in its table."""
    lines = toml_lines(SHAPES)
    assert [lines.of(path) for path in (("table", "no"), ("table", "a", "b", "c"), ("nothing", "at all"), ())] == [8, 9, 1, 1]


@pytest.mark.parametrize("text", ["", "\n\n# only a comment", "a = 1", "a = 1 # no end of line", "[t]", "\t[ t . u ]\na=2"])
def test_short_texts(text):
    """The edges of a text."""
    assert [problem for problem in wrong(text) if problem[1] != 99] == []


@pytest.mark.parametrize("text", ["a = [1, ", "a = { b = 1", "[", "[[x", '"', "a = '''", "= 3", "a b = 3", "a = [1 2]", "a = {1}", "]", "a = [\x00"])
def test_texts_that_are_not_toml_end_quietly(text):
    """The parser has refused them before; the walk must still come to an end."""
    assert isinstance(toml_lines(text).paths(), dict)


def made_up(rng):
    """A random text of tables, in which every number is its own line."""
    lines = []

    def number():
        return str(len(lines) + 1)

    def value(depth=0):
        pick = rng.randrange(7 if depth < 3 else 4)
        if pick < 2:
            return number()
        if pick == 2:
            return rng.choice(['"a # [ = b"', "'{ } ]'", "true", "1.5e3", "2026-01-01"])
        if pick == 3:
            return rng.choice(['""', "[]", "{}", '"\\\\"'])
        if pick in (4, 5):
            return "[" + ", ".join(value(depth + 1) for _ in range(rng.randrange(1, 4))) + "]"
        return "{ " + ", ".join(f"k{i} = {value(depth + 1)}" for i in range(rng.randrange(1, 3))) + " }"
    names = iter(range(1000))
    for _ in range(rng.randrange(1, 6)):
        header = rng.choice(["[t{}]", '["t {}"]', "[[steps]]", "[a.b{}]", "[[arr.in{}]]", "# {}", "[[steps]] # [no] {}"])
        lines.append(header.format(next(names)))
        for _ in range(rng.randrange(4)):
            if rng.random() < 0.2:
                lines.extend(rng.choice([["# c = 99"], [""], [f'm{next(names)} = """', "x = 99", '"""'], [f"l{next(names)} = [", '  "]", # ]', "]"]]))
            lines.append(rng.choice(["k{}", '"k {}"', "d{}.e", " k{}", "'k.{}'"]).format(next(names)) + " = " + value() + rng.choice(["", " # = [", "  "]))
    return "\n".join(lines)


def test_many_random_texts():
    """What the standard library finds, each on its line."""
    rng = random.Random(5)
    texts = [made_up(rng) for _ in range(400)]
    assert sum(len(list(leaves(tomllib.loads(t)))) for t in texts) > 5000
    assert [(t, w) for t in texts if (w := wrong(t))] == []
