"""What the buttons of a row do, on the fields alone: a page works the same with and without script."""

from __future__ import annotations

from collections.abc import Mapping

from web.form.reading import rows
from web.form.sections import SECTIONS, Section, Shape

_BY_NAME = {section.name: section for section in SECTIONS if section.shape is not Shape.RECORD}


def obey(command: str, fields: Mapping[str, str]) -> tuple[dict[str, str], str]:
    """The fields after `add unknowns`, `remove unknowns.2`, `up unknowns.2` or `down unknowns.2`, and the one to focus.

    A command that means nothing changes nothing.
    """
    verb, _, target = command.partition(" ")
    name, _, number = target.partition(".")
    section = _BY_NAME.get(name)
    if section is None or verb not in ("add", "remove", "up", "down"):
        return dict(fields), ""
    order = rows(name, fields)
    if verb == "add":
        order.append(order[-1] + 1 if order else 0)
        focus = len(order) - 1
    else:
        if not number.isdigit() or int(number) not in order:
            return dict(fields), ""
        focus = order.index(int(number))
        if verb == "remove":
            del order[focus]
            focus = min(focus, len(order) - 1)
        else:
            other = focus + (-1 if verb == "up" else 1)
            if 0 <= other < len(order):
                order[focus], order[other] = order[other], order[focus]
                focus = other
    return _renumbered(section, fields, order), f"{name}.{max(focus, 0)}.{_first_key(section)}"


def _first_key(section: Section) -> str:
    return "name" if section.shape is Shape.MAP else section.columns[0].key


def _renumbered(section: Section, fields: Mapping[str, str], order: list[int]) -> dict[str, str]:
    """The rows of a section in the order given, numbered from 0; a row that is new has an empty first field."""
    prefix = section.name + "."
    kept = {name: text for name, text in fields.items() if not name.startswith(prefix)}
    for place, number in enumerate(order):
        kept[f"{prefix}{place}.{_first_key(section)}"] = ""
        for name, text in fields.items():
            if name.startswith(f"{prefix}{number}."):
                kept[f"{prefix}{place}.{name.split('.', 2)[2]}"] = text
    return kept
