#!/usr/bin/env python3
"""Do a study on this machine, killed at random, with Slurm, and with Snakemake; the tables must be the same bytes.

    tools/compare_clusters.py target/release/pellicle                       undisturbed against killed three times
    tools/compare_clusters.py target/release/pellicle --slurm               also Slurm (tools/cluster/single_node_slurm)
    tools/compare_clusters.py target/release/pellicle --snakemake PROGRAM   also Snakemake

Needs nothing but Python, and Linux for the kills.
"""

import argparse
import os
import pathlib
import random
import signal
import subprocess
import sys
import tempfile
import time

SCENARIO = """
title = "Small ellipsoid"
[surface]
shape = "ellipsoid"
semi_axes = ["2 um", "2 um", "3 um"]
edge_length = "0.45 um"
[membrane]
bending_rigidity = "20 kBT"
shear_viscosity = "1e-9 N s/m"
[volume]
condition = "fixed"
[time]
end = "1.2 ms"
[output]
row_every = "0.05 ms"
frame_every = "0.4 ms"
checkpoint_every = "0.05 s"
"""
STUDY = """
title = "Small ellipsoids"
scenario = "small.toml"
[[axis]]
key = "membrane.bending_rigidity"
from = "10 kBT"
to = "40 kBT"
count = 4
spacing = "logarithmic"
[[axis]]
key = "membrane.shear_viscosity"
values = ["1e-9 N s/m", "3e-9 N s/m"]
[[axis]]
key = "surface.edge_length"
values = ["0.45 um", "0.5 um", "9 um"]
[[outcome]]
name = "far from rest"
when = 'free_energy > "300 kBT"'
[[outcome]]
name = "nearly at rest"
"""
FILES = ("table.csv", "table.parquet", "phase_diagram.svg", "phase_diagram.png", "report.html")
TOOLS = pathlib.Path(__file__).resolve().parent


def children(process):
    """Processes that a process has started."""
    found = set()
    for task in pathlib.Path(f"/proc/{process}/task").glob("*/children"):
        try:
            found.update(map(int, task.read_text().split()))
        except OSError:
            pass
    return found


def kill(process):
    try:
        os.kill(process, signal.SIGKILL)
    except ProcessLookupError:
        pass


def scan_with_kills(command, kills, length):
    """Start a scan again and again; each time kill it at a random moment, every other time with its runs."""
    done = 0
    for k in range(kills):
        scan = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        try:
            scan.wait(timeout=random.uniform(0.1, 0.9) * length / kills)
            break
        except subprocess.TimeoutExpired:
            runs = children(scan.pid) if k % 2 == 0 else set()
            kill(scan.pid)
            for run in runs:
                kill(run)
            scan.wait()
            done += 1
    subprocess.run(command, check=True, stdout=subprocess.DEVNULL)
    return done


def wait_for_slurm():
    while subprocess.run(["squeue", "-h"], check=True, capture_output=True, text=True).stdout.strip():
        time.sleep(1)


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("program", type=pathlib.Path)
    parser.add_argument("--study", type=pathlib.Path, help="another study than 24 small runs")
    parser.add_argument("--kills", type=int, default=3)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--slurm", action="store_true")
    parser.add_argument("--snakemake", metavar="PROGRAM")
    arguments = parser.parse_args()
    random.seed(arguments.seed)
    program = arguments.program.resolve()

    with tempfile.TemporaryDirectory() as place:
        place = pathlib.Path(place)
        study = arguments.study
        if study is None:
            (place / "small.toml").write_text(SCENARIO)
            study = place / "study.toml"
            study.write_text(STUDY)
        study = study.resolve()

        def scan(name):
            return [program, "scan", study, "--out", place / name, "--parallel", "2", "--progress", "none"]

        begun = time.monotonic()
        subprocess.run(scan("whole"), check=True, stdout=subprocess.DEVNULL)
        length = time.monotonic() - begun
        rows = (place / "whole" / "table.csv").read_text().splitlines()[1:]
        failed = sum(",failed," in row for row in rows)
        print(f"{len(rows)} runs in {length:.0f} s, {failed} of them failed as they must")

        def compare(name, how):
            wrong = [file for file in FILES if (place / "whole" / file).read_bytes() != (place / name / file).read_bytes()]
            if wrong:
                sys.exit(f"{how}: {', '.join(wrong)} differ")
            print(f"{how}: the same bytes in {', '.join(FILES)}")

        done = scan_with_kills(scan("killed"), arguments.kills, length)
        compare("killed", f"killed {done} times")
        if arguments.slurm:
            environment = os.environ | {"PELLICLE": str(program)}
            script = TOOLS / "cluster" / "slurm_array.sh"
            subprocess.run([script, study, place / "slurm"], check=True, env=environment)
            wait_for_slurm()
            compare("slurm", "Slurm")
        if arguments.snakemake:
            subprocess.run(
                [arguments.snakemake, "--snakefile", TOOLS / "cluster" / "Snakefile", "--cores", "2", "--quiet", "all",
                 "--directory", place, "--config", f"study={study}", f"folder={place / 'snakemake'}",
                 f"program={program}"],
                check=True,
            )
            # The diagram and the page are made with the table.
            compare("snakemake", "Snakemake")


if __name__ == "__main__":
    main()
