# SPDX-License-Identifier: Apache-2.0
"""`survey` against a served bench: what it says, finds, records, and that it writes nothing.

A rig file that is wrong in known ways (order of words, an address that does not
exist, a unit that nobody has) is what a newcomer has in the first hour.
"""
import json
import pathlib
import signal
import subprocess
import sys
import tempfile

from verbs import RIG, SMOKE, Claims, call, program  # it also leads to tests/bench

import bench

CHANGES = (
    ("bench_speed:      {device: transducer, input_register: 0, type: float32, words: high_first",
     "bench_speed:      {device: transducer, input_register: 0, type: float32, words: low_first"),
    ("winding_temperature: {device: controller, input_register: 5,",
     "winding_temperature: {device: controller, input_register: 500,"),
    ("fault_box:  {link: bench_wire, unit: 5}", "fault_box:  {link: bench_wire, unit: 77}"),
)


def good_rig(claims, served, folder):
    record = folder / "timing.json"
    done = call("survey", "--rig", RIG, "--record", record, *served.link_options())
    claims.that(done.returncode == 0, f"a bench that answers gives 0: {done.stderr}")
    for what in ('firmware: "2.4.1"', "nothing was commanded", "function 43/14: vendor",
                 "round trip min", "life_counter", "fault_code", "none"):
        claims.that(what in done.stdout, f"the survey says {what!r}")
    kind, _ = served.state()
    claims.that(kind == "rest", "the shaft never moved")
    timing = json.loads(record.read_text())
    devices = {d["device"]: d for link in timing["links"] for d in link["devices"]}
    claims.that(len(devices) == 5, f"five devices were timed: {list(devices)}")
    for name, device in devices.items():
        for read in device["reads"]:
            claims.that(0 < read["min_ns"] <= read["median_ns"] <= read["p95_ns"] <= read["max_ns"],
                        f"{name}: the times are in order: {read}")
    planned = call("plan", "--rig", RIG, "--timing", record, SMOKE)
    claims.that(planned.returncode in (0, 2) and "as a survey measured them" in planned.stdout,
                f"plan uses the times: {planned.stderr}")
    other = folder / "other.yaml"
    other.write_text(RIG.read_text().replace("rig: model-spm", "rig: other", 1))
    refused = call("plan", "--rig", other, "--timing", record, SMOKE)
    claims.that(refused.returncode == 65 and "model-spm" in refused.stderr,
                "times of another rig are refused")


def wrong_rig(claims, served, folder):
    text, changed = RIG.read_text(), 0
    for old, new in CHANGES:
        changed += old in text
        text = text.replace(old, new)
    claims.that(changed == 3, f"the rig was made wrong in three ways: {changed}")
    rig = folder / "wrong.yaml"
    rig.write_text(text)
    done = call("survey", "--rig", rig, *served.link_options())
    claims.that(done.returncode == 69, "a device that does not answer gives 69")
    claims.that("exception 2 (illegal data address): no such address" in done.stdout,
                "the exception is explained")
    claims.that("exception 11" in done.stdout or "does not answer" in done.stdout,
                "the unit that nobody has is named")
    return done.stdout


def watched(claims, served):
    process = subprocess.Popen([program(), "survey", "--rig", str(RIG), "--watch",
                                *served.link_options()], stdout=subprocess.PIPE, text=True)
    seen = 0
    for line in process.stdout:
        seen += line.startswith("values now")
        if seen == 3:
            process.send_signal(signal.SIGINT)
            break
    rest = process.stdout.read()
    claims.that(process.wait(timeout=20) == 0, "Ctrl-C ends the watch in order")
    claims.that(seen == 3 and "bench_speed" in rest, "it went on showing values")


def main():
    claims = Claims()
    with tempfile.TemporaryDirectory() as name, bench.Served() as served:
        folder = pathlib.Path(name)
        good_rig(claims, served, folder)
        wrong_rig(claims, served, folder)
        watched(claims, served)
    missing = call("survey")
    claims.that(missing.returncode == 64 and "--rig" in missing.stderr, "the rig is asked for")
    claims.end()


if __name__ == "__main__":
    sys.exit(main())
