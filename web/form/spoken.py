"""What a field is called in a sentence: "Endpoints 2", "Unknowns y, unit", "Integrand"."""

from __future__ import annotations

from collections.abc import Mapping

from web.form.reading import rows
from web.form.sections import HEAD, SECTIONS, Shape

_LABELS = {column.key: column.label for column in HEAD}
_BY_NAME = {section.name: section for section in SECTIONS}


def spoken(field: str, fields: Mapping[str, str]) -> str:
    """The name of a field of the composer; "" for what is none."""
    name, _, rest = field.partition(".")
    section = _BY_NAME.get(name)
    if section is None:
        return _LABELS.get(field, "")
    number, _, key = rest.rpartition(".")
    label = next((column.label for column in section.columns if column.key == key), "")
    if section.shape is Shape.RECORD:
        return label
    places = rows(name, fields)
    place = places.index(int(number)) + 1 if number.isdigit() and int(number) in places else 1
    if section.shape is Shape.LIST:
        return f"{section.heading} {place}"
    row = f"{section.heading} {fields.get(f'{name}.{number}.name', '').strip() or place}"
    return f"{row}, {label[0].lower()}{label[1:]}" if label and len(section.columns) > 1 else row
