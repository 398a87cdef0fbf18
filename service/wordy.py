"""An outcome in lines for a person: numbers as they are, lists one item to a line, evidence indented below it."""

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

LEADS = ("text", "says")  # what an item is about comes first, on a line of its own


def lines(outcome: Mapping[str, Any]) -> Iterator[str]:
    """Every line, without what nobody gave; nothing in them can steer a terminal."""
    for line in _of_mapping(outcome, ""):
        yield shown(line)


def shown(text: str) -> str:
    """A text with what would steer a terminal written out: files and servers say things too."""
    return "".join(sign if sign.isprintable() or sign == "\n" else ascii(sign)[1:-1] for sign in text)


def _of_mapping(values: Mapping[str, Any], indent: str) -> Iterator[str]:
    for name, value in values.items():
        label = str(name).replace("_", " ")
        if value is None or value == "":
            continue
        if isinstance(value, str) and "\n" in value:
            yield value
        elif isinstance(value, Mapping):
            yield f"{indent}{label}: {_in_one(value)}"
        elif isinstance(value, Sequence) and not isinstance(value, str):
            yield f"{indent}{label}: {len(value) or 'nothing'}"
            yield from _of_items(value, indent + "  ")
        else:
            yield f"{indent}{label}: {value}"


def _of_items(items: Sequence[Any], indent: str) -> Iterator[str]:
    for item in items:
        if not isinstance(item, Mapping):
            yield f"{indent}{item}"
            continue
        lead = next((name for name in LEADS if name in item), None)
        if lead is None:
            yield f"{indent}{_in_one(item)}"
            continue
        yield f"{indent}{item[lead]}"
        yield from _of_mapping({name: value for name, value in item.items() if name != lead}, indent + "    ")


def _in_one(values: Mapping[str, Any]) -> str:
    return ", ".join(f"{str(name).replace('_', ' ')} {value}" for name, value in values.items() if value is not None)
