"""Run benchmarks: ``python -m bench [--list] [--quick] [NAME ...]``."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from bench.catalogue import SUBJECTS, load
from bench.record import write_report

RESULTS = Path(__file__).parent / "results"


def main(arguments: list[str] | None = None) -> int:
    """Run the chosen benchmarks and write what they measured."""
    options = _parser().parse_args(arguments)
    if options.list:
        for name, what in SUBJECTS.items():
            print(f"{name:14} {what}")
        return 0
    for name in options.names or SUBJECTS:
        print(f"== {name}: {SUBJECTS[name]}", flush=True)
        report = load(name).run(quick=options.quick, output=options.output)
        paths = write_report(name, report, options.output, quick=options.quick)
        print(report.markdown(), flush=True)
        print("written:", ", ".join(path.name for path in paths), flush=True)
    return 0


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(prog="python -m bench", description=__doc__)
    parser.add_argument("names", nargs="*", metavar="NAME")
    parser.add_argument("--list", action="store_true", help="name the benchmarks and stop")
    parser.add_argument("--quick", action="store_true", help="small sizes, to see them work")
    parser.add_argument("--output", type=Path, default=RESULTS, help="folder of the results")
    return parser


if __name__ == "__main__":
    sys.exit(main())
