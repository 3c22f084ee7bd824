"""Starter files of every kind: tables of readings, maps, limits, schemes, event water, plans, wastes, titrations."""

from __future__ import annotations

import json
from importlib.resources import files

from aquabuf.assess.limits import shipped_limits
from aquabuf.errors import InputError
from aquabuf.readings.template import template, template_kinds

__all__ = ["starter", "starter_kinds"]

LIMITS_KIND = "limits"
TITRATION_KINDS = ("titration_points", "titration_samples")
FILES = {"long_map": "toml", "scheme": "toml", "event": "toml", "plan": "toml", "tank": "toml"} | dict.fromkeys(
    TITRATION_KINDS, "csv")


def starter(kind: str) -> str:
    """Text of a starter file. Raises InputError for an unknown kind, naming those there are."""
    if kind == LIMITS_KIND:
        return _limits_text()
    if kind in FILES:
        return (files("aquabuf") / "data" / f"starter_{kind}.{FILES[kind]}").read_text(encoding="utf-8")
    if kind not in starter_kinds():
        raise InputError(f"no starter file is named {kind!r}. Use one of: {', '.join(starter_kinds())}.")
    return template(kind)


def starter_kinds() -> list[str]:
    """Kinds of starter file: tables of readings and a map, then what a run may be given beside them."""
    return [*template_kinds(), LIMITS_KIND, *FILES]


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
