# SPDX-License-Identifier: Apache-2.0
"""A served bench and runs against it, for the tests of this folder.

Every server listens on ports of its own (port 0, read from its `ready` line),
and every process is ended by its id. Nothing sleeps for a fixed time where an
event can be waited for.
"""
import json
import os
import pathlib
import signal
import subprocess
import sys
import tempfile

TOP = pathlib.Path(__file__).resolve().parents[2]
RIG = TOP / "rigs" / "model-spm.yaml"
RELEASE = TOP / "suites" / "release.yaml"
SMOKE = TOP / "suites" / "smoke.yaml"


def program():
    """The binary under test: named by the build, or found in the usual place."""
    return os.environ.get("DRIVETRIAL", str(TOP / "build" / "gcc" / "drivetrial"))


def urgent():
    """What puts a server before everything else on the machine, where that is allowed."""
    command = ["chrt", "-f", "10"]
    try:
        allowed = subprocess.run(command + ["true"], capture_output=True).returncode == 0
    except OSError:
        allowed = False
    return command if allowed else []


class Served:
    """`drivetrial serve` on free ports of loopback."""

    def __init__(self, defect=None, seed=1, rig=RIG, links=("drive_wire", "bench_wire"),
                 realtime=False):
        command = (urgent() if realtime else []) + [program(), "serve", "--rig", str(rig), "--seed", str(seed)]
        for link in links:
            command += ["--listen", f"{link}=tcp:127.0.0.1:0"]
        if defect:
            command += ["--defect", defect]
        self.process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
        line = self.process.stdout.readline()
        if not line.startswith("ready "):
            raise RuntimeError(f"the served bench did not start: {line!r}")
        self.addresses = dict(word.split("=", 1) for word in line.split()[1:])

    def link_options(self):
        options = []
        for link, address in self.addresses.items():
            options += ["--link", f"{link}={address}"]
        return options

    def state(self):
        """What the model says of its shaft now: ('rest'|'moving', rpm)."""
        self.process.send_signal(signal.SIGUSR1)
        return parse_state(self.process.stdout.readline())

    def end(self):
        """Ends the server; what the model says last."""
        self.process.terminate()
        last = self.process.stdout.read().strip().splitlines()
        self.process.wait(timeout=20)
        return parse_state(last[-1])

    def __enter__(self):
        return self

    def __exit__(self, *unused):
        if self.process.poll() is None:
            self.process.kill()
            self.process.wait()
        self.process.stdout.close()


def parse_state(line):
    words = line.split()
    values = dict(word.split("=", 1) for word in words if "=" in word)
    kind = "rest" if "rest" in words else "moving"
    return kind, float(values["speed_rpm"])


class Run:
    """A finished run: exit code, output, folder."""

    def __init__(self, code, stdout, stderr, folder):
        self.code, self.stdout, self.stderr = code, stdout, stderr
        self.folder = pathlib.Path(folder)

    def results(self):
        return json.loads((self.folder / "results.json").read_text())

    def verdicts(self):
        return {test["name"]: test["verdict"]
                for suite in self.results()["suites"] for test in suite["tests"]}

    def journal(self):
        lines = (self.folder / "journal.jsonl").read_text(errors="replace").splitlines()
        events = []
        for line in lines:
            try:
                events.append(json.loads(line))
            except ValueError:
                pass
        return events


def start_run(served, suite, folder, *options):
    command = [program(), "run", "--rig", str(RIG), "--quiet", "--out", str(folder),
               *served.link_options(), *options, str(suite)]
    return subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)


def run(served, suite, folder, *options, timeout=180):
    process = start_run(served, suite, folder, *options)
    out, err = process.communicate(timeout=timeout)
    return Run(process.returncode, out, err, folder)


def rehearse(suite, folder, *options, rig=RIG, env=None, timeout=180):
    command = [program(), "rehearse", "--rig", str(rig), "--quiet", "--out", str(folder), *options,
               str(suite)]
    process = subprocess.run(command, capture_output=True, text=True, timeout=timeout,
                             env=dict(os.environ, **(env or {})))
    return Run(process.returncode, process.stdout, process.stderr, folder)


def report(recorded, new, *options, timeout=180):
    """A recorded run, judged again into a new folder."""
    command = [program(), "report", str(recorded), "--out", str(new), *options]
    process = subprocess.run(command, capture_output=True, text=True, timeout=timeout)
    return Run(process.returncode, process.stdout, process.stderr, new)


def folder():
    return tempfile.TemporaryDirectory(prefix="drivetrial-test-")


class Checks:
    """Counts what was asked; a script ends with its exit code."""

    def __init__(self):
        self.passed, self.failed = 0, 0

    def that(self, condition, text):
        if condition:
            self.passed += 1
        else:
            self.failed += 1
            print(f"FAILED: {text}", file=sys.stderr)
        return condition

    def exit(self):
        print(f"{self.passed} passed, {self.failed} failed")
        sys.exit(0 if self.failed == 0 and self.passed > 0 else 1)
