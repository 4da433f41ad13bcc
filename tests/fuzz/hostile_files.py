# SPDX-License-Identifier: Apache-2.0
"""Rig and suite files, and command lines, of somebody who means harm, through the program itself.

Each row changes one place of a good pair of files. What is refused is refused
with exit 65, file, line and column, in bounded time and memory; what is taken
runs. Whatever happens, nothing that a terminal would obey is printed, and no
file is made outside of the run folder.
"""
import os
import pathlib
import re
import resource
import subprocess
import sys
import tempfile
import xml.etree.ElementTree as tree

HERE = pathlib.Path(__file__).resolve().parent
PROGRAM = os.environ.get("DRIVETRIAL", str(HERE.parents[1] / "build" / "gcc" / "drivetrial"))
RIG = (HERE / "recording" / "rig.yaml").read_text()
SUITE = (HERE / "recording" / "suite.yaml").read_text()
OBEYED = re.compile("[\0-\x08\x0b-\x1f\x7f\x80-\x9f\u200e\u200f\u202a-\u202e\u2066-\u2069]")
TEST = "- test: STP-01"
HOLD = "hold: 100 ms"
NESTED = "{hold: 100 h}"
for _ in range(8):
    NESTED = "{cycle: {times: 100000, steps: [" + NESTED + ", " + NESTED + "]}}"

# file, what is replaced, by what, exit codes that are right, options
REFUSED, TAKEN = (65,), (0, 1, 2)
ROWS = [
    ("suite", TEST, TEST + '\n    title: "\\e[2J\\u202e<script>alert(1)</script>\\a]]>"', TAKEN),
    ("suite", TEST, TEST + '\n    requirement: ["SRS\\e[0m", "<b>&"]', TAKEN),
    ("suite", "suite: short", 'suite: short\nnote: "\\e]0;x\\a\\x9b"', TAKEN),
    ("rig", "rig: small", 'rig: small\nnote: "\\e]0;x\\a\\x9b<"', TAKEN),
    ("suite", "stimulus:", 'sweep: {v: ["\\e[1m", "x/../y", "<i>"]}\n    title: "$v"\n    stimulus:',
     TAKEN),
    ("suite", TEST, TEST + '\n    title: "one\\npass  STP-99\\n\\tfail  STP-98"', TAKEN),
    ("suite", TEST, TEST + '\n    title: "a\\0b"', REFUSED),
    ("suite", TEST, TEST + '\n    tags: ["a\\e[0m"]', REFUSED),
    ("suite", TEST, "- test: ../../x", REFUSED),
    ("suite", TEST, "- test: " + "x" * 65, REFUSED),
    ("suite", "suite: short", "suite: ../../x", REFUSED),
    ("rig", "rig: small", "rig: ../../x", REFUSED),
    ("suite", HOLD, "hold: 1e300 s", REFUSED),
    ("suite", HOLD, "hold: 1e9 s", REFUSED),
    ("suite", HOLD, "hold: -1 s", REFUSED),
    ("suite", HOLD, "hold: nan s", REFUSED),
    ("suite", HOLD, "hold: .inf s", REFUSED),
    ("suite", TEST, TEST + "\n    repeat: 1000000000", REFUSED),
    ("suite", TEST, TEST + "\n    repeat: 1" + "0" * 40, REFUSED),
    ("suite", HOLD, "cycle: {times: 99999999999999999999, steps: [{hold: 1 ms}]}", REFUSED),
    ("suite", "stimulus:", "sweep: {v: [%s]}\n    title: $v\n    stimulus:"
     % ", ".join(f"{i} rpm" for i in range(3000)), REFUSED),
    ("suite", "every: 10 ms", "every: 1e-9 s", REFUSED),
    ("suite", "300 rpm", "1e308 rpm", REFUSED),
    ("suite", "max: 120 ms", "max: 1e400 ms", REFUSED),
    ("rig", "scale: 0.2, unit: rpm, refresh", "scale: 1e-320, unit: rpm, refresh", REFUSED),
    ("rig", "input_register: 6", "input_register: 99999999999999999999", REFUSED),
    ("rig", "input_register: 6", "input_register: 65536", REFUSED),
    ("rig", "registers: 8", "registers: 4000000000", REFUSED),
    ("rig", "unit: 3}", "unit: 1e3}", REFUSED),
    ("rig", "[-3300, 3300]", "[-1e400, 1e400]", REFUSED),
    ("rig", "reply_timeout: 100 ms", "reply_timeout: 1e17 s", REFUSED),
    ("rig", "127.0.0.1:15020", "127.0.0.1:99999999", REFUSED),
    ("rig", "127.0.0.1:15020", "\\e[2J:502", REFUSED),
    ("rig", "127.0.0.1:15020", "a" * 5000 + ":502", REFUSED),
    ("rig", 'tcp: "127.0.0.1:15020"', "rtu: ../../../etc/passwd", REFUSED),
    ("rig", "pole_pairs: 4", "pole_pairs: 2000000000", REFUSED),
    ("rig", "serves:", "parameters: {inertia: 1e300 kgm2}\n  serves:", REFUSED),
    ("rig", "unit: rpm, refresh", 'unit: "\\e[2J", refresh', REFUSED),
    ("rig", "unit: rpm, refresh", 'unit: rpm, names: {1: "\\e[1m"}, refresh', REFUSED),
    ("rig", "devices:", "? {a: b}\ndevices:", REFUSED),
    ("suite", "tests:", "# " + "x" * (1 << 20) + "\ntests:", REFUSED),
    ("suite", "tests:", "deep: " + "[" * 40000 + "\ntests:", REFUSED),
    ("suite", "suite: short", "suite: short", (64,), "--only", "\x1b[2J\u202e"),
    ("suite", "suite: short", "suite: short", (64,), "--tag", "\x1b]0;x\x07"),
    ("suite", "suite: short", "suite: short", (64, 65), "--set", "a=\x1b[2J"),
    ("suite", "suite: short", "suite: short", (64,), "--part", "9999999999/1"),
    ("suite", "suite: short", "suite: short", (64,), "--seed", "99999999999999999999999"),
    ("suite", "suite: short", "suite: short", (64,), "--\x1b[2J"),
]


def bounded():
    """1 GiB and 20 s of a processor are plenty; sanitizers reserve more address space."""
    resource.setrlimit(resource.RLIMIT_CPU, (20, 20))


def run(base, rig, suite, verb, *options):
    base = pathlib.Path(base)
    (base / "rig.yaml").write_text(rig)
    (base / "suite.yaml").write_text(suite)
    out = ["--out", "run"] if verb == "rehearse" else []
    process = subprocess.run([PROGRAM, verb, "--rig", "rig.yaml", *out, *options, "suite.yaml"],
                             cwd=base, capture_output=True, timeout=60, preexec_fn=bounded)
    return process.returncode, process.stdout.decode() + process.stderr.decode()


def files(base):
    return sorted(str(path.relative_to(base)) for path in pathlib.Path(base).iterdir())


def texts_of_outputs(base):
    """All texts of reports that are parsed, and the others as they are; none may be obeyed."""
    folder = pathlib.Path(base) / "run"
    yield "junit.xml", "".join(str(node.attrib) for node in tree.parse(folder / "junit.xml").iter())
    yield "report.html", "".join(tree.parse(folder / "report.html").getroot().itertext())
    for path in folder.rglob("*"):
        if path.suffix in (".xml", ".html", ".json", ".jsonl", ".csv", ".txt"):
            yield path.name, path.read_text()


def check(row):
    which, old, new, codes, *options = row
    what = f"{which}: {new[:60]!r} {options}"
    rig = RIG.replace(old, new, 1) if which == "rig" else RIG
    suite = SUITE.replace(old, new, 1) if which == "suite" else SUITE
    failures = []
    with tempfile.TemporaryDirectory(prefix="drivetrial-test-") as base:
        code, printed = run(base, rig, suite, "rehearse", *options)
        if code not in codes:
            failures.append(f"{what}: exit {code}, not one of {codes}\n{printed[:600]}")
        if codes == REFUSED and not re.match(r"(rig|suite)\.yaml:\d+:\d+: ", printed) and \
                "larger than" not in printed and "too large" not in printed:
            failures.append(f"{what}: no position in {printed[:200]!r}")
        if re.search(r"^\s*(pass|fail)\s+STP-9", printed, re.M):
            failures.append(f"{what}: a title forges a line")
        if OBEYED.search(printed):
            failures.append(f"{what}: {OBEYED.findall(printed)} is printed")
        planned = run(base, rig, suite, "plan", *options)[1] if code in TAKEN else ""
        if OBEYED.search(planned) or re.search(r"^\s*(pass|fail)\s+STP-9", planned, re.M):
            failures.append(f"{what}: plan prints it as it is")
        made = {"rig.yaml", "suite.yaml"} | ({"run"} if codes == TAKEN else set())
        if set(files(base)) != made:
            failures.append(f"{what}: {files(base)} were made")
        if codes == TAKEN and code in TAKEN:
            for name, text in texts_of_outputs(base):
                if OBEYED.search(text):
                    failures.append(f"{what}: {OBEYED.findall(text)} in {name}")
    return failures


def nested_cycles():
    """A stimulus of centuries: planned in no time and without an overflow of its duration."""
    with tempfile.TemporaryDirectory(prefix="drivetrial-test-") as base:
        suite = SUITE.replace(HOLD, NESTED[1:-1], 1)
        code, printed = run(base, RIG, suite, "plan")
        return [] if code in (0, 2, 65) and "-" not in re.findall(r"stimulus (\S+)", printed) else \
            [f"nested cycles: exit {code}\n{printed[:600]}"]


def main():
    failures = nested_cycles()
    for row in ROWS:
        failures += check(row)
    for failure in failures:
        print(f"FAILED: {failure}", file=sys.stderr)
    print(f"{len(ROWS) + 1} rows, {len(failures)} failures")
    sys.exit(1 if failures else 0)


if __name__ == "__main__":
    main()
