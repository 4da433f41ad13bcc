# SPDX-License-Identifier: Apache-2.0
"""Every way out leaves the bench at rest: asked from the model, not from the runner.

    ways_out.py [MOMENTS]   signals at MOMENTS moments spread over a run (default 5)

SIGINT and SIGTERM: exit 3, rest confirmed, a readable and sealed run folder.
SIGKILL: samples and journal readable up to that moment, and the watchdogs stop
the shaft. A dead server: exit 4, said in plain words.
"""
import pathlib
import signal
import subprocess
import sys
import time

import numpy

import bench

RUN_SECONDS = 9.0  # of the smoke suite, about; moments are spread over it


def wait_for(moment, process):
    """Lets the run go on until that moment of it; the moment itself is what is tested."""
    end = time.monotonic() + moment
    while time.monotonic() < end and process.poll() is None:
        time.sleep(0.005)


def until_rest(server, seconds):
    end = time.monotonic() + seconds
    state = server.state()
    while state[0] != "rest" and time.monotonic() < end:
        time.sleep(0.02)
        state = server.state()
    return state


def readable(checks, folder, what):
    rows = 0
    for path in sorted((folder / "samples").glob("*.npy")):
        try:
            rows += len(numpy.load(path, mmap_mode="r"))
        except ValueError as error:
            checks.that(False, f"{what}: {path.name} is not readable: {error}")
    return rows


def polite(checks, number, moment):
    with bench.folder() as base, bench.Served() as server:
        what = f"{number.name} at {moment:.2f} s"
        process = bench.start_run(server, bench.SMOKE, f"{base}/run")
        wait_for(moment, process)
        ended = process.poll() is not None
        process.send_signal(number)
        out, err = process.communicate(timeout=60)
        folder = pathlib.Path(base) / "run"
        state = server.state()
        checks.that(state[0] == "rest", f"{what}: the model says {state}")
        if ended or not folder.exists():
            return  # before the first command, or after the end
        checks.that(process.returncode in (3, 0), f"{what}: exit {process.returncode}\n{out}{err}")
        checks.that((folder / "junit.xml").exists(), f"{what}: no junit.xml")
        sums = subprocess.run(["sha256sum", "-c", "--quiet", "SHA256SUMS"], cwd=folder,
                              capture_output=True, text=True)
        checks.that(sums.returncode == 0, f"{what}: {sums.stdout}{sums.stderr}")
        readable(checks, folder, what)


def killed(checks, moment):
    with bench.folder() as base, bench.Served() as server:
        what = f"SIGKILL at {moment:.2f} s"
        process = bench.start_run(server, bench.SMOKE, f"{base}/run")
        wait_for(moment, process)
        process.kill()
        process.communicate(timeout=60)
        state = until_rest(server, 10)
        checks.that(state[0] == "rest", f"{what}: the watchdogs have not stopped it: {state}")
        folder = pathlib.Path(base) / "run"
        if not folder.exists():
            return
        events = bench.Run(0, "", "", folder).journal()
        checks.that(bool(events) and events[0]["event"] == "run_begin", f"{what}: no journal")
        rows = readable(checks, folder, what)
        if any(event["event"] == "stimulus" for event in events):
            checks.that(rows > 0, f"{what}: no samples")


def dead_server(checks, moment):
    with bench.folder() as base, bench.Served() as server:
        process = bench.start_run(server, bench.SMOKE, f"{base}/run")
        wait_for(moment, process)
        server.process.kill()
        server.process.wait()
        out, err = process.communicate(timeout=120)
        checks.that(process.returncode == 4, f"dead server: exit {process.returncode}\n{out}{err}")
        last = err.strip().splitlines()[-1] if err.strip() else ""
        checks.that(last.startswith("NOT AT REST"), f"dead server: last line is '{last}'")
        report = (pathlib.Path(base) / "run" / "report.html").read_text()
        checks.that("not confirmed" in report.lower() or "not at rest" in report.lower(),
                    "dead server: the report does not say so")


def main():
    checks = bench.Checks()
    moments = int(sys.argv[1]) if len(sys.argv) > 1 else 5
    for i in range(moments):
        moment = 0.05 + RUN_SECONDS * i / moments
        polite(checks, (signal.SIGINT, signal.SIGTERM)[i % 2], moment)
    for i in range(max(2, moments // 4)):
        killed(checks, 0.5 + RUN_SECONDS * (i + 0.5) / max(2, moments // 4))
    dead_server(checks, 4.0)
    checks.exit()


if __name__ == "__main__":
    main()
