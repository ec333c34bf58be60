"""What a benchmark hands back: tables, bars met or missed, remarks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

Value = str | int | float | None


@dataclass
class Table:
    """Rows of measured values under named columns, units in the names."""

    title: str
    columns: tuple[str, ...]
    rows: list[tuple[Value, ...]] = field(default_factory=list)

    def add(self, *values: Value) -> None:
        """Append a row."""
        if len(values) != len(self.columns):
            raise ValueError(f"{self.title}: {len(values)} values, {len(self.columns)} columns")
        self.rows.append(values)

    def markdown(self) -> str:
        """Return the table as markdown."""
        lines = [self.columns, ["---"] * len(self.columns)]
        lines += [[_text(value) for value in row] for row in self.rows]
        body = "\n".join("| " + " | ".join(line) + " |" for line in lines)
        return f"### {self.title}\n\n{body}\n"


@dataclass(frozen=True)
class Bar:
    """A figure to reach and the one measured."""

    what: str
    measured: float
    limit: float
    at_least: bool = False

    @property
    def met(self) -> bool:
        """Whether it is reached."""
        if self.at_least:
            return self.measured >= self.limit
        return self.measured <= self.limit

    def cells(self) -> tuple[Value, ...]:
        """Return one row of the table of bars."""
        relation = "≥" if self.at_least else "≤"
        verdict = "met" if self.met else "MISSED"
        return self.what, self.measured, f"{relation} {_text(self.limit)}", verdict


@dataclass
class Report:
    """Everything one benchmark measured."""

    title: str
    settings: dict[str, Value]
    tables: list[Table] = field(default_factory=list)
    bars: list[Bar] = field(default_factory=list)
    remarks: list[str] = field(default_factory=list)
    figures: list[str] = field(default_factory=list)

    def table(self, title: str, *columns: str) -> Table:
        """Begin a table."""
        self.tables.append(Table(title, columns))
        return self.tables[-1]

    def at_most(self, what: str, measured: float, limit: float) -> None:
        """Record a figure that should not exceed a limit."""
        self.bars.append(Bar(what, float(measured), limit))

    def at_least(self, what: str, measured: float, limit: float) -> None:
        """Record a figure that should reach a limit."""
        self.bars.append(Bar(what, float(measured), limit, at_least=True))

    def markdown(self) -> str:
        """Return the report as markdown, without the machine."""
        settings = ", ".join(f"{key} {_text(value)}" for key, value in self.settings.items())
        parts = [f"## {self.title}\n", f"{settings}\n"]
        parts += [table.markdown() for table in self.tables]
        if self.bars:
            bars = Table("Bars", ("bar", "measured", "wanted", "verdict"))
            bars.rows += [bar.cells() for bar in self.bars]
            parts.append(bars.markdown())
        parts += [f"- {remark}" for remark in self.remarks]
        parts += [f"\n![{figure}]({figure})" for figure in self.figures]
        return "\n".join(parts) + "\n"


def _text(value: Value) -> str:
    if value is None:
        return "–"
    if isinstance(value, float):
        return f"{value:.4g}" if abs(value) < 1e4 else f"{value:,.0f}"
    return f"{value:,}" if isinstance(value, int) else str(value)


def join(names: Sequence[str]) -> str:
    """Return names as a phrase."""
    return ", ".join(names) if names else "none"
