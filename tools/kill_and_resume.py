#!/usr/bin/env python3
"""Kill a run at random moments until it has died often enough, then compare it with one that was left alone.

Every resumed run must end with the same bytes as the uninterrupted one: series, collection, frames, and the hash of
the final state. Needs nothing but Python.

    tools/kill_and_resume.py target/release/pellicle --kills 100
    tools/kill_and_resume.py target/release/pellicle --scenario examples/tether.toml --set time.end="0.1 s"
"""

import argparse
import json
import pathlib
import random
import subprocess
import sys
import tempfile
import time

SCENARIO = """
title = "Small ellipsoid"
[surface]
shape = "ellipsoid"
semi_axes = ["2 um", "2 um", "3 um"]
edge_length = "0.42 um"
[membrane]
bending_rigidity = "20 kBT"
shear_viscosity = "1e-9 N s/m"
[volume]
condition = "fixed"
[time]
end = "2 ms"
[output]
row_every = "0.02 ms"
frame_every = "0.1 ms"
checkpoint_every = "0.02 s"
"""
UNCOMPARED = {"run.log", "run.lock", "summary.json", "checkpoint", "checkpoint.previous"}


def results(folder):
    """Bytes of the files that must be the same."""
    return {p.name: p.read_bytes() for p in folder.iterdir() if p.name not in UNCOMPARED}


def end_state(folder):
    """The parts of the summary that must be the same."""
    summary = json.loads((folder / "summary.json").read_text())
    kept = {key: summary[key] for key in ("stopped_by", "end", "steps", "output")}
    return kept | {"state": summary["provenance"]["state_sha256"]}


def differences(one, other):
    """Names of what differs between two finished runs."""
    a, b = results(one), results(other)
    names = [name for name in sorted(a.keys() | b.keys()) if a.get(name) != b.get(name)]
    return names + (["summary.json"] if end_state(one) != end_state(other) else [])


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("program", type=pathlib.Path)
    parser.add_argument("--scenario", type=pathlib.Path)
    parser.add_argument("--set", action="append", default=[], metavar="KEY=VALUE")
    parser.add_argument("--kills", type=int, default=100)
    parser.add_argument("--seed", type=int, default=1)
    arguments = parser.parse_args()
    random.seed(arguments.seed)

    with tempfile.TemporaryDirectory() as place:
        place = pathlib.Path(place)
        scenario = arguments.scenario
        if scenario is None:
            scenario = place / "small.toml"
            scenario.write_text(SCENARIO)
        common = ["--threads", "1", "--quiet"]
        overrides = [part for text in arguments.set for part in ("--set", text)]

        def start(folder):
            return [arguments.program, "run", scenario, "--out", folder, "--force", *overrides, *common]

        reference = place / "reference"
        begun = time.monotonic()
        subprocess.run(start(reference), check=True)
        length = time.monotonic() - begun

        kills = lost = rounds = 0
        while kills < arguments.kills:
            rounds += 1
            folder = place / f"killed{rounds}"
            command = start(folder)
            while True:
                child = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True)
                # Some die while they start, most on their way, some while they write the end.
                try:
                    _, told = child.communicate(timeout=random.uniform(0, 0.5) ** 2 * 2 * length)
                except subprocess.TimeoutExpired:
                    child.kill()
                    child.communicate()
                    kills += 1
                    has_checkpoint = any((folder / name).exists() for name in ("checkpoint", "checkpoint.previous"))
                    lost += not has_checkpoint
                    command = [arguments.program, "resume", folder, *common] if has_checkpoint else start(folder)
                    continue
                if child.returncode != 0:
                    sys.exit(f"the program ended with {child.returncode}: {told}")
                break
            wrong = differences(reference, folder)
            if wrong:
                sys.exit(f"round {rounds} differs after {kills} kills: {', '.join(wrong)}")
        print(
            f"{kills} kills in {rounds} runs of {length:.1f} s ({lost} before the first checkpoint): "
            "every run ended with the same bytes as the uninterrupted one"
        )


if __name__ == "__main__":
    main()
