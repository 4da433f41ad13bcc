# SPDX-License-Identifier: Apache-2.0
"""What the tests of the verbs share: the program, its files, one call."""
import os
import pathlib
import subprocess
import sys

TOP = pathlib.Path(__file__).resolve().parents[2]
RIG = TOP / "rigs" / "model-spm.yaml"
SMOKE = TOP / "suites" / "smoke.yaml"
RELEASE = TOP / "suites" / "release.yaml"
sys.path.insert(0, str(TOP / "tests" / "bench"))


def program():
    return os.environ.get("DRIVETRIAL", str(TOP / "build" / "gcc" / "drivetrial"))


def call(*words, timeout=300):
    """Runs the program; the finished process with its text."""
    return subprocess.run([program(), *map(str, words)], capture_output=True, text=True,
                          timeout=timeout, check=False)


class Claims:
    """Counts what was claimed, and ends the test with what was wrong."""

    def __init__(self):
        self.count = 0
        self.wrong = []

    def that(self, true, what):
        self.count += 1
        if not true:
            self.wrong.append(what)
            print("WRONG:", what, file=sys.stderr)

    def end(self):
        print(f"{self.count} claims, {len(self.wrong)} wrong")
        sys.exit(1 if self.wrong or self.count == 0 else 0)
