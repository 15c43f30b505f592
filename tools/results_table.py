#!/usr/bin/env python3
"""Write tests/RESULTS.md from the records of the checks against laws and published results.

    tools/results_table.py --run            run all checks (long ones too), then write the table
    tools/results_table.py --run --short    run only the short ones
    tools/results_table.py RECORDS          write the table from a records.jsonl made earlier

Every check appends one JSON line per quantity to records.jsonl in the directory named by PELLICLE_RESULTS.
Only the standard library of Python 3 is needed.
"""

import argparse
import datetime
import json
import os
import platform
import subprocess
import sys
import tempfile
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent


def law_tests():
    """Names of the test files that check laws: those that use the recorder."""
    return sorted(
        path.stem
        for path in (ROOT / "tests").glob("*.rs")
        if "evidence::record::Record" in path.read_text(encoding="utf-8")
    )


def run_checks(directory, short):
    """Run the checks; returns the list of tests that failed. Failures are recorded, not hidden."""
    failed = []
    for name in law_tests():
        command = ["cargo", "test", "--release", "-p", "pellicle", "--test", name, "--", "--nocapture"]
        if not short:
            command.append("--include-ignored")
        environment = dict(os.environ, PELLICLE_RESULTS=str(directory))
        print(f"{name} …", flush=True)
        done = subprocess.run(command, cwd=ROOT, env=environment, stdout=subprocess.PIPE, stderr=subprocess.STDOUT)
        text = done.stdout.decode("utf-8", "replace")
        (Path(directory) / f"{name}.log").write_text(text, encoding="utf-8")
        if done.returncode != 0:
            lines = [line.split()[1] for line in text.splitlines() if line.startswith("test ") and "FAILED" in line]
            failed.extend(f"{name}::{line}" for line in lines or ["did not finish"])
    return failed


def machine():
    """Processor, number of threads and system."""
    processor = platform.processor() or platform.machine()
    try:
        for line in Path("/proc/cpuinfo").read_text(encoding="utf-8").splitlines():
            if line.startswith("model name"):
                processor = line.split(":", 1)[1].strip()
                break
    except OSError:
        pass
    return f"{processor}, {os.cpu_count()} threads, {platform.system()}"


def number(value):
    """A value in at most six digits."""
    if value != value:
        return "–"
    if value == 0:
        return "0"
    return f"{value:.6g}"


def size_of(error, absolute):
    """An error as text: per cent where relative."""
    return f"{error:+.1e}" if absolute else f"{100 * error:+.3g} %"


def row(record):
    """One line of the table."""
    levels = ", ".join(
        f"{number(level)}: {number(value)} ({size_of(error, record['absolute'])})"
        for (level, value), error in zip(record["measured"], record["errors"])
    )
    limit = f"{record['limit']:.1e}" if record["absolute"] else f"{100 * record['limit']:.3g} %"
    met = abs(record["errors"][-1]) <= record["limit"]
    order = "–" if record["order"] is None else f"{record['order']:.2f}"
    cells = [
        record["quantity"],
        record["source"],
        number(record["expected"]),
        f"{record['level']}: {levels}",
        order,
        limit + ("" if met else " **missed**"),
    ]
    return "| " + " | ".join(cell.replace("|", "\\|") for cell in cells) + " |"


def table(records, failed, date, note):
    """The whole page."""
    newest = {}
    for record in records:
        # A later record of the same quantity at the same levels replaces an earlier one.
        newest[(record["law"], record["quantity"], tuple(l for l, _ in record["measured"]))] = record
    lines = [
        "# Measured against laws and published results",
        "",
        f"Written by `tools/results_table.py` on {date}, {machine()}.",
        "Each line: what is measured, where the expected value comes from, the value and its error at each level of",
        "refinement, the observed order of convergence, and the limit on the last error.",
    ]
    if note:
        lines += ["", note]
    if failed:
        lines += ["", "Tests that failed in this run:", ""] + [f"- `{name}`" for name in failed]
    laws = sorted({record["law"] for record in newest.values()})
    for law in laws:
        lines += ["", f"## {law.replace('_', ' ').capitalize()}", ""]
        lines += ["| quantity | source | expected | measured (error) | order | limit |", "|-|-|-|-|-|-|"]
        lines += [row(record) for key, record in newest.items() if key[0] == law]
    return "\n".join(lines) + "\n"


def read(path):
    """Records of a file; a line cut short by a killed run is passed over with a warning."""
    records = []
    for count, line in enumerate(Path(path).read_text(encoding="utf-8").splitlines(), 1):
        try:
            records.append(json.loads(line))
        except json.JSONDecodeError:
            print(f"{path}:{count}: not a record, passed over", file=sys.stderr)
    return records


def main():
    """Run the checks if asked, and write the table."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("records", nargs="?", help="records.jsonl of an earlier run")
    parser.add_argument("--run", action="store_true", help="run the checks first")
    parser.add_argument("--short", action="store_true", help="with --run: leave the long checks out")
    parser.add_argument("--out", default=ROOT / "tests" / "RESULTS.md", help="where to write (default: tests/RESULTS.md)")
    parser.add_argument("--note", default="", help="a remark to put at the top of the page")
    options = parser.parse_args()
    if options.run == bool(options.records):
        parser.error("give either --run or a file of records")
    failed = []
    if options.run:
        directory = tempfile.mkdtemp(prefix="pellicle_results_")
        failed = run_checks(directory, options.short)
        path = Path(directory) / "records.jsonl"
        print(f"records and logs: {directory}")
    else:
        path = Path(options.records)
    if not path.exists():
        sys.exit(f"{path}: no records")
    text = table(read(path), failed, datetime.date.today().isoformat(), options.note)
    Path(options.out).write_text(text, encoding="utf-8")
    print(f"wrote {options.out}")


if __name__ == "__main__":
    main()
