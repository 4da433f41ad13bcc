# SPDX-License-Identifier: Apache-2.0
"""The detection matrix: which shipped test catches which defect, in rehearsal.

    matrix.py [SEEDS [HEALTHY_SEEDS]]           5 and 200 unless given
    matrix.py SEEDS HEALTHY_SEEDS --brief       each defect only on the suite meant for it
    matrix.py ... --defect NAME ... --suite NAME ...   a part of it

A defect is caught by a test where that test fails; `inconclusive`, `error` and
`aborted` are shown as such and are no catch, with one exception that is said:
a frozen register image is caught by the run being broken off, since nothing
that was read after it is a measurement.

Demanded: each defect is caught on each seed, by a fail of a test that holds
the check meant for it (model_defect_list.h names the check, ELSEWHERE the suite). The
healthy models give no fail, and at most 1 % of their runs are not all pass.
"""
import argparse
import collections
import json
import os
import pathlib
import re
import subprocess
import sys
import tempfile

TOP = pathlib.Path(__file__).resolve().parents[2]

# Every shipped suite and the rig that it is rehearsed on.
SUITES = {
    "release": "model-spm",
    "smoke": "model-spm",
    "faults": "model-spm",
    "modulation": "model-spm",
    "encoder": "model-spm",
    "load-step": "model-spm",
    "operating-map": "model-spm",
    "soak": "model-spm",
    "field-weakening": "model-ipm",
    "block-commutation": "model-block",
}

# Defects that the release suite is not the one to catch.
ELSEWHERE = {
    "index-drifting": "encoder",
    "sine-error": "encoder",
    "word-order-swapped": "encoder",
    "torn": "encoder",
    "mtpa-off": "field-weakening",
    "field-weakening-late": "field-weakening",
    "phase-duty-wrong": "modulation",
    "null-states-unequal": "modulation",
    "undervoltage-missed": "faults",
    "phase-loss-missed": "faults",
    "torque-off-channel-ignored": "faults",
}

# Caught by the run being broken off: exit 3, nothing judged as measured.
ABORTED = {"frozen-image"}

MARKS = {"fail": "F", "inconclusive": "i", "error": "e", "aborted": "a"}


def program():
    return os.environ.get("DRIVETRIAL", str(TOP / "build" / "gcc" / "drivetrial"))


def catalogue():
    """name -> the check meant for it, from the table that the model is built from."""
    text = (TOP / "rigs" / "model" / "model_defect_list.h").read_text()
    rows = re.findall(r'DEFECT\([A-Z_]+,\s*"([^"]+)",\s*"([^"]+)"', text)
    listed = subprocess.run([program(), "rehearse", "--defect", "list"], capture_output=True,
                            text=True, check=True).stdout.splitlines()
    if [line.split("\t")[0] for line in listed] != [row[0] for row in rows]:
        raise SystemExit("the catalogue of the program is not that of the source")
    return dict(rows)


class Rehearsal:
    """One run: exit code, tests as (name, verdict, names of checks with a failed metric)."""

    def __init__(self, suite, seed, defect=None):
        with tempfile.TemporaryDirectory(prefix="drivetrial-matrix-") as base:
            folder = pathlib.Path(base) / "run"
            command = [program(), "rehearse", "--quiet", "--rig",
                       str(TOP / "rigs" / f"{SUITES[suite]}.yaml"), "--out", str(folder), "--seed",
                       str(seed), str(TOP / "suites" / f"{suite}.yaml")]
            if defect:
                command[2:2] = ["--defect", defect]
            done = subprocess.run(command, capture_output=True, text=True)
            self.code = done.returncode
            self.said = (done.stdout + done.stderr).strip()
            self.tests = []
            try:
                results = json.loads((folder / "results.json").read_text())
            except FileNotFoundError:
                return
        for entry in (test for part in results["suites"] for test in part["tests"]):
            failed = {check["kind"] for check in entry.get("checks", [])
                      if any(metric.get("verdict") == "fail" for metric in check["metrics"])}
            self.tests.append((entry["name"], entry["verdict"], failed, entry.get("reason", "")))

    def caught(self, defect, meant):
        """Whether a fail of the check meant for the defect is there."""
        if defect in ABORTED:
            return self.code == 3 and any("life counter" in why for *_, why in self.tests)
        if self.code != 1:
            return False
        if meant.startswith("bench/"):
            return any(name.startswith(meant) and verdict == "fail"
                       for name, verdict, _, _ in self.tests)
        return any(verdict == "fail" and meant in failed for _, verdict, failed, _ in self.tests)


def defects_of(arguments, checks):
    return arguments.defect or list(checks)


def detect(arguments, checks):
    """Runs defects; returns matrix[suite][test][defect] = counter of verdicts, and complaints."""
    matrix = collections.defaultdict(lambda: collections.defaultdict(dict))
    complaints = []
    for defect in defects_of(arguments, checks):
        home = ELSEWHERE.get(defect, "release")
        suites = [home] if arguments.brief else arguments.suite or list(SUITES)
        for seed in range(1, arguments.seeds + 1):
            for suite in suites:
                run = Rehearsal(suite, seed, defect)
                for name, verdict, _, _ in run.tests:
                    if run.code == 3 and verdict == "error":
                        verdict = "aborted"
                    counter = matrix[suite][name].setdefault(defect, collections.Counter())
                    counter[verdict] += 1
                if suite == home and not run.caught(defect, checks[defect]):
                    seen = [f"{name}: {verdict}" for name, verdict, _, _ in run.tests
                            if verdict != "pass"]
                    complaints.append(f"{defect}, seed {seed}: not caught by {checks[defect]} in "
                                      f"{suite}, exit {run.code}; {', '.join(seen[:6])}"
                                      f"{'' if run.tests else run.said[:200]}")
            print(".", end="", file=sys.stderr, flush=True)
    return matrix, complaints


def show(matrix, defects):
    """One line a test: which defects it answers with what, and on how many seeds."""
    for suite, tests in matrix.items():
        print(f"\n{suite} on {SUITES[suite]}")
        for name, row in tests.items():
            cells = []
            for defect in defects:
                counter = row.get(defect, {})
                marks = [f"{MARKS[verdict]}{counter[verdict]}" for verdict in MARKS
                         if counter.get(verdict)]
                if marks:
                    cells.append(f"{defect}={'+'.join(marks)}")
            print(f"  {name:<34} {' '.join(cells) or '-'}")


def healthy(arguments):
    complaints = []
    runs = unclear = 0
    for suite in arguments.suite or list(SUITES):
        for seed in range(1, arguments.healthy + 1):
            run = Rehearsal(suite, seed)
            runs += 1
            bad = [(name, verdict, why) for name, verdict, _, why in run.tests if verdict != "pass"]
            if run.code == 2:
                unclear += 1
                print(f"\nhealthy {suite}, seed {seed}: {bad[:3]}", file=sys.stderr)
            elif run.code != 0:
                complaints.append(f"healthy {suite}, seed {seed}: exit {run.code}, {bad[:3]}"
                                  f"{'' if run.tests else run.said[:300]}")
            print(".", end="", file=sys.stderr, flush=True)
    print(f"\nhealthy: {runs} runs, {len(complaints)} with a fail or broken off, "
          f"{unclear} not all decided")
    if unclear > 0.01 * runs:
        complaints.append(f"healthy: {unclear} of {runs} runs were not all decided, more than 1 %")
    return complaints


def main():
    parser = argparse.ArgumentParser(description="the detection matrix")
    parser.add_argument("seeds", nargs="?", type=int, default=5)
    parser.add_argument("healthy", nargs="?", type=int, default=200)
    parser.add_argument("--brief", action="store_true")
    parser.add_argument("--defect", action="append")
    parser.add_argument("--suite", action="append", choices=list(SUITES))
    arguments = parser.parse_args()
    checks = catalogue()
    complaints = []
    if arguments.seeds:
        print(f"F fail, i inconclusive, e error, a aborted; the number of seeds of "
              f"{arguments.seeds}")
        matrix, complaints = detect(arguments, checks)
        show(matrix, defects_of(arguments, checks))
    if arguments.healthy:
        complaints += healthy(arguments)
    for complaint in complaints:
        print(f"FAILED: {complaint}")
    count = len(defects_of(arguments, checks))
    print(f"{count} defects, {arguments.seeds} seeds, {len(complaints)} complaints")
    sys.exit(1 if complaints else 0)


if __name__ == "__main__":
    main()
