# SPDX-License-Identifier: Apache-2.0
"""Every path, verb, option and exit code that README.md and DEVELOPERS.md name is there."""
import os
import pathlib
import re
import subprocess
import sys

TOP = pathlib.Path(__file__).resolve().parents[2]
PROGRAM = os.environ.get("DRIVETRIAL", str(TOP / "build" / "gcc" / "drivetrial"))
PATH = re.compile(r"(?<![\w/.-])\.?/?((?:runner|checks|suites|tests|rigs|reports|\.ci)/[\w./*-]+)")
ENDS = (".c", ".h", ".yaml", ".py", ".md", ".css", ".cmake", ".sh")
# Made by a run, or standing for a kind of file.
MADE = re.compile(r"^(reports|tests|checks|suites|rigs)/.*(NAME|HOUSE|TEST|\*)|^runs/|^checks/checks")


def words(text):
    for name in PATH.findall(text):
        name = name.rstrip(".,:;")
        if not MADE.search(name):
            yield name


def main():
    failures, asked = [], 0
    for document in ("README.md", "DEVELOPERS.md"):
        text = (TOP / document).read_text()
        for name in words(text):
            asked += 1
            if not (TOP / name).exists():
                failures.append(f"{document} names {name}, which is not there")
        for verb in re.findall(r"drivetrial (run|rehearse|serve|report|plan|survey|compare|schema)\b", text):
            asked += 1
            result = subprocess.run([PROGRAM, verb, "--help"], capture_output=True, text=True)
            if result.returncode != 0 or not result.stdout:
                failures.append(f"{document} names the verb {verb}, which has no help")
        for line in re.findall(r"^ {4,}.*drivetrial (\w+) (.*)$", text, re.M):
            helped = subprocess.run([PROGRAM, line[0], "--help"], capture_output=True, text=True).stdout
            for option in re.findall(r"--([a-z][a-z-]*)", line[1]):
                asked += 1
                if f"--{option}" not in helped:
                    failures.append(f"{document} uses --{option} of {line[0]}, which is not there")
    for failure in failures:
        print(f"FAILED: {failure}", file=sys.stderr)
    print(f"{asked - len(failures)} passed, {len(failures)} failed")
    sys.exit(1 if failures or asked < 10 else 0)


if __name__ == "__main__":
    main()
