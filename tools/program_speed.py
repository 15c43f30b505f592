#!/usr/bin/env python3
"""Times the program on a shipped scenario at several mesh sizes.

    program_speed.py [--program target/release/pellicle] [--scenario examples/two_phase_vesicle.toml]
                     [--vertices 2562 10242 ...] [--steps 40] [--write tests/SPEED.md]

The edge length is set so that the start mesh has about the given number of vertices; adaptation of the mesh is off, so
that the number stays. Each size runs a fixed number of accepted steps, with one thread and with two, in turn. Prints a
dated Markdown table: time per step, its parts, peak memory per vertex, speed-up with two threads, and the exponent with
which time grows between sizes. `--write` puts the table at the head of a file, before the older ones.

Wall times on a busy machine say little; processor times (one thread) and ratios within one run say more, so both are
given. The run is interrupted after the wanted number of steps; what it did until then is counted by itself.
"""

import argparse
import datetime
import json
import math
import os
import pathlib
import signal
import subprocess
import sys
import tempfile

PARTS = ["forces", "assembly", "factorisation", "solves", "transport", "remap", "remeshing", "output", "other"]


def run(arguments, vertices, threads, folder):
    edge = arguments.edge * math.sqrt(arguments.edge_vertices / vertices)
    out = folder / f"{vertices}_{threads}"
    command = [
        arguments.program, "run", arguments.scenario, "--out", str(out), "--threads", str(threads),
        "--set", f"surface.edge_length={edge:.6g} um", "--progress", "json", "--set", "mesh.adapt=false",
    ]
    for assignment in arguments.set:
        command += ["--set", assignment]
    child = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
    for line in child.stdout:
        # A run that is asked to stop finishes its step and writes everything.
        if json.loads(line).get("steps", 0) >= arguments.steps:
            child.send_signal(signal.SIGINT)
            break
    child.stdout.read()
    _, status, usage = os.wait4(child.pid, 0)
    if os.waitstatus_to_exitcode(status) not in (0, 130):
        sys.exit(f"{' '.join(command)} failed")
    summary = json.loads((out / "summary.json").read_text())
    timings = summary["timings"]
    count = summary["steps"]["accepted"] + summary["steps"]["refused"]
    return {
        "vertices": summary["end"]["vertex_count"],
        "threads": threads,
        "attempts": count,
        "wall": timings["total_s"] / count,
        "processor": (usage.ru_utime + usage.ru_stime) / count,
        "parts": {part: timings[f"{part}_s"] / timings["total_s"] for part in PARTS},
        "memory": usage.ru_maxrss * 1024 / summary["end"]["vertex_count"],
        "solver": summary.get("solver", {}),
    }


def table(arguments, results):
    commit = subprocess.run(["git", "rev-parse", "--short", "HEAD"], capture_output=True, text=True).stdout.strip()
    lines = [
        f"## {datetime.date.today().isoformat()}, {pathlib.Path(arguments.scenario).stem}, commit {commit}",
        "",
        f"{arguments.steps} accepted steps from the start; {arguments.note}load of the machine when begun: "
        f"{os.getloadavg()[0]:.1f} on {os.cpu_count()} cores.",
        "",
        "| vertices | threads | s per attempt, wall | processor | growth | " + " | ".join(f"{p} %" for p in PARTS)
        + " | KB per vertex | iterations per system | factors per system |",
        "|" + "---|" * (8 + len(PARTS)),
    ]
    last = {}
    for r in results:
        growth = ""
        before = last.get(r["threads"])
        if before:
            ratio = math.log(r["processor"] / before["processor"]) / math.log(r["vertices"] / before["vertices"])
            growth = f"{ratio:.2f}"
        last[r["threads"]] = r
        systems = max(r["solver"].get("systems", 0), 1)
        lines.append(
            f"| {r['vertices']} | {r['threads']} | {r['wall']:.3f} | {r['processor']:.3f} | {growth} | "
            + " | ".join(f"{100 * r['parts'][p]:.0f}" for p in PARTS)
            + f" | {r['memory'] / 1e3:.1f} | {r['solver'].get('iterations', 0) / systems:.1f}"
            + f" | {r['solver'].get('factors', 0) / systems:.2f} |"
        )
    lines.append("")
    for vertices in dict.fromkeys(r["vertices"] for r in results):
        pair = {r["threads"]: r["wall"] for r in results if r["vertices"] == vertices}
        if len(pair) == 2:
            lines.append(f"Two threads against one at {vertices} vertices, wall: {pair[1] / pair[2]:.2f}.")
    single = [r for r in results if r["threads"] == 1]
    if len(single) > 1:
        a, b = single[0], single[-1]
        exponent = math.log(b["processor"] / a["processor"]) / math.log(b["vertices"] / a["vertices"])
        lines.append(f"Exponent of growth from {a['vertices']} to {b['vertices']} vertices: {exponent:.2f}.")
    return "\n".join(lines) + "\n\n"


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--program", default="target/release/pellicle")
    parser.add_argument("--scenario", default="examples/two_phase_vesicle.toml")
    parser.add_argument("--edge", type=float, default=0.375, help="edge length of the scenario [um]")
    parser.add_argument("--edge-vertices", type=int, default=2562, help="vertices at that edge length")
    parser.add_argument("--vertices", type=int, nargs="+", default=[2562, 10242, 40962, 163842])
    parser.add_argument("--threads", type=int, nargs="+", default=[1, 2])
    parser.add_argument("--steps", type=int, default=40)
    parser.add_argument("--set", action="append", default=[], help="more settings of the scenario")
    parser.add_argument("--note", default="")
    parser.add_argument("--write", help="Markdown file to put the table into")
    arguments = parser.parse_args()
    results = []
    with tempfile.TemporaryDirectory() as folder:
        for vertices in arguments.vertices:
            for threads in arguments.threads:
                results.append(run(arguments, vertices, threads, pathlib.Path(folder)))
                print(json.dumps(results[-1]), file=sys.stderr, flush=True)
    text = table(arguments, results)
    print(text)
    if arguments.write:
        path = pathlib.Path(arguments.write)
        head = "# Speed\n\nBy `tools/program_speed.py`. Newest first.\n\n"
        older = path.read_text().removeprefix(head) if path.exists() else ""
        path.write_text(head + text + older)


if __name__ == "__main__":
    main()
