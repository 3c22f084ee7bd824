"""Starter files of every kind: one for each command that runs as it stands, and what may be given beside it."""

from __future__ import annotations

import json
from difflib import get_close_matches
from importlib.resources import files
from pathlib import Path

from aquabuf.assess.limits import shipped_limits
from aquabuf.errors import FileError, InputError
from aquabuf.readings.template import template, template_kinds

__all__ = ["COMMANDS", "starter", "starter_kinds", "write_starter"]

LIMITS_KIND = "limits"
TITRATION_KINDS = ("titration_points", "titration_samples")
FILES = {"long_map": "toml", "scheme": "toml", "event": "toml", "plan": "toml", "tank": "toml"} | dict.fromkeys(
    TITRATION_KINDS, "csv")


COMMANDS = {"assess": "stream", "titration": "", "lake": "lake", "dose": "plan", "tank": "tank"}  # kind it stands for
REMARK = "#"


def starter(kind: str) -> str:
    """Text of a starter file. Raises InputError for an unknown kind, naming those there are."""
    if kind in COMMANDS:
        text = _one_table_of_titrations() if kind == "titration" else _text(COMMANDS[kind])
        return f"# Made for `aquabuf {kind} FILE --out FOLDER`; it runs as it stands.\n{text}"
    if kind not in starter_kinds():
        near = get_close_matches(kind, starter_kinds(), n=1)
        hint = f" Did you mean {near[0]!r}?" if near else ""
        raise InputError(f"no starter file is named {kind!r}.{hint} Use one of: {', '.join(starter_kinds())}.")
    return _text(kind)


def starter_kinds() -> list[str]:
    """Kinds of starter file: tables of readings and a map, what a run may be given beside them, the commands."""
    return list(dict.fromkeys([*template_kinds(), LIMITS_KIND, *FILES, *COMMANDS]))


def write_starter(kind: str, path: Path, *, force: bool = False) -> None:
    """Write a starter file to `path`. Raises FileError where it is there already, unless `force`."""
    text = starter(kind)
    try:
        with path.open("w" if force else "x", encoding="utf-8", newline="\n") as stream:
            stream.write(text)
    except FileExistsError:
        raise FileError(f"{path.name} exists already and is not overwritten. Choose another name with --out, or "
                        f"replace it with --force.") from None
    except OSError as error:
        raise FileError(f"{path.name} cannot be written: {(error.strerror or 'unknown reason').lower()}. "
                        f"Choose another name with --out.") from None


def _text(kind: str) -> str:
    """Text of a file that is known to exist."""
    if kind == LIMITS_KIND:
        return _limits_text()
    if kind in FILES:
        return (files("aquabuf") / "data" / f"starter_{kind}.{FILES[kind]}").read_text(encoding="utf-8")
    return template(kind)


def _one_table_of_titrations() -> str:
    """The starter points with what is known of each sample in the first row of its titration."""
    points, samples = (_text(kind).splitlines() for kind in TITRATION_KINDS)
    header, *rows = (line.split(",") for line in points if not line.startswith(REMARK))
    more, *known = (line.split(",") for line in samples if not line.startswith(REMARK))
    of_sample = {name: values for name, *values in known}
    lines = [",".join([*header, *more[1:]])]
    lines += [",".join([*row, *of_sample.pop(row[0], [""] * len(more[1:]))]) for row in rows]
    remarks = [line for line in points if line.startswith(REMARK)]
    remarks += ["# What is known of a sample stands in the first row of its titration, or in a table of its own "
                "(--samples):"]
    remarks += [line for line in samples if line.startswith(f"{REMARK}  ") and "sample_id" not in line]
    return "\n".join([*remarks, *lines]) + "\n"


def _limits_text() -> str:
    """The shipped limits as a limits file, each commented out: remove the # of those to change."""
    lines = ["# Limits of your own. A limit named as a shipped one replaces it; any other name adds one.",
             "# These are the shipped limits; take away the # in front of those you change.",
             '# remove = ["name"] drops shipped limits, only_mine = true drops all of them.', ""]
    for x in shipped_limits():
        entry = {"quantity": x.quantity, "operator": x.operator, "limit": x.limit, "unit": x.unit,
                 "kinds": list(x.kinds), "regimes": list(x.regimes), "group": x.group, "words": x.words,
                 "next_step": x.next_step, "source": x.source}
        if x.lower > float("-inf"):
            entry["lower"] = x.lower
        lines.append(f'#[limits."{x.name}"]')
        lines += [f"#{key} = {json.dumps(value, ensure_ascii=False)}" for key, value in entry.items()]
        lines.append("")
    return "\n".join(lines)
