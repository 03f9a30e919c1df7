"""Lines for a terminal on what was read, before there is any record."""

from backtest.records import Inputs, Remark
from backtest.reporting import wording as say


def input_lines(inputs: Inputs) -> list[str]:
    """Return lines on files, desks, days and every remark of checked inputs."""
    lines = [f"{s.role}: {s.name}, {say.plural(s.rows, 'row')}, sha256 {s.sha256[:12]}" for s in inputs.sources]
    desks, days = inputs.pnl["desk"].nunique(), len(inputs.calendar)
    counts = f"{say.plural(desks, 'desk')}, {say.plural(days, 'business day')}"
    lines.append(f"{counts}, {inputs.calendar[0]} to {inputs.as_of} (cut-off)")
    lines.append(say.plural(len(inputs.remarks), "remark") + (":" if inputs.remarks else ""))
    return lines + [remark_line(remark) for remark in inputs.remarks]


def remark_line(remark: Remark) -> str:
    """Return one remark as a line: rule, desk, days, count and words."""
    days = remark.first if remark.first == remark.last else f"{remark.first} to {remark.last}"
    where = ", ".join(part for part in (remark.source, remark.desk, days) if part)
    return f"- {remark.rule} ({where}; {remark.count:,}): {remark.text}"
