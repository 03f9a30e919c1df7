"""The text of a drafted study: TOML values, each with its reason; what was not found is a line to complete."""

import json
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from backtest.reading.draft_layout import Finding


@dataclass(frozen=True, slots=True)
class Line:
    """One key of the study with the finding behind it."""

    key: str
    finding: Finding


def render(notes: Iterable[str], sections: Mapping[str, Sequence[Line]]) -> str:
    """Return the study as TOML: notes as comments, then the sections that have lines."""
    blocks = ["\n".join(f"# {_one_line(note)}" for note in notes)]
    for section, lines in sections.items():
        if lines:
            blocks.append("\n".join([f"[{section}]", *map(_line, lines)]))
    return "\n\n".join(blocks) + "\n"


def _line(line: Line) -> str:
    setting = f"{line.key} = {_value(line.finding.value)}"
    why = _one_line(line.finding.why)
    return f"{setting}  # confirm: {why}" if line.finding.sure else f"# {setting}  # complete: {why}"


def _value(value: object) -> str:
    """Write a value as TOML: text, numbers, and lists of column and level."""
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, list):
        return "[" + ", ".join(_value(item) for item in value) + "]"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{key} = {_value(item)}" for key, item in value.items()) + " }"
    return str(value)


def _one_line(text: str) -> str:
    """Keep a comment a comment: no line breaks or other control characters in it."""
    return "".join(c if c.isprintable() else " " for c in text)
