"""Reports on disk: JSON with every number, markdown to read."""

from __future__ import annotations

import json
from dataclasses import asdict
from datetime import UTC, datetime
from pathlib import Path

from bench.machine import describe
from bench.report import Report

QUICK_WARNING = (
    "**Quick run: small sizes, to see the benchmark work. Its speeds say nothing; "
    "figures of accuracy hold for the sizes named.**"
)


def write_report(name: str, report: Report, folder: Path, *, quick: bool) -> list[Path]:
    """Write ``<date>-<name>.json`` and ``.md``; return their paths."""
    folder.mkdir(parents=True, exist_ok=True)
    now = datetime.now(UTC)
    machine = describe()
    stem = f"{now:%Y-%m-%d}-{name}" + ("-quick" if quick else "")
    content = {"date": now.isoformat(timespec="seconds"), "quick": quick, "machine": machine}
    content |= asdict(report)
    content["bars"] = [asdict(bar) | {"met": bar.met} for bar in report.bars]
    numbers, page = folder / f"{stem}.json", folder / f"{stem}.md"
    numbers.write_text(json.dumps(content, indent=1, ensure_ascii=False, default=float) + "\n")
    head = [f"# {name}, {now:%Y-%m-%d %H:%M} UTC\n"]
    if quick:
        head.append(QUICK_WARNING + "\n")
    head += [f"- {key}: {value}" for key, value in machine.items()]
    page.write_text("\n".join(head) + "\n\n" + report.markdown())
    return [numbers, page]
