# SPDX-License-Identifier: Apache-2.0
"""The release suite must pass on the healthy model and catch every seeded defect.

    defects.py rehearse [SEEDS]   in virtual time
    defects.py served [TIMES]     over real Modbus, healthy TIMES in a row, then each defect

Which test must fail, and which words its reason must hold, stands in CAUGHT.
"""
import pathlib
import sys

import bench

# defect: (test that must fail, metric or word in its reason)
CAUGHT = {
    "overshoot": ("SPD-01", "overshoot"),
    "sluggish": ("SPD-01", "rise_time"),
    "encoder-offset": ("ALN-01", "frame_offset"),
    "fault-not-latched": ("FLT-01", "stays_latched"),
    "wrong-fault-code": ("FLT-04", "code_right"),
    "watchdog-missing": ("bench/watchdog:controller", "link_watchdog"),
}


def failing(run, test):
    for suite in run.results()["suites"]:
        for entry in suite["tests"]:
            if entry["name"] == test:
                return entry
    return None


def check_defect(checks, run, defect):
    test, word = CAUGHT[defect]
    checks.that(run.code == 1, f"{defect}: exit {run.code}, expected 1\n{run.stdout}{run.stderr}")
    entry = failing(run, test)
    if not checks.that(entry is not None and entry["verdict"] == "fail",
                       f"{defect}: {test} is {entry and entry['verdict']}"):
        return
    reason = entry["reason"]
    failed = [metric["name"] for check in entry.get("checks", []) for metric in check["metrics"]
              if metric.get("verdict") == "fail"]
    checks.that(word in reason or word in failed, f"{defect}: {test} fails for '{reason}' {failed}")
    if defect == "watchdog-missing":
        moved = [event for event in run.journal()
                 if event["event"] == "command" and event.get("channel") == "speed_command"
                 and event.get("value")]
        checks.that(not moved, f"{defect}: the motor was commanded to move: {moved[:1]}")


def rehearsed(checks, seeds):
    for seed in range(1, seeds + 1):
        with bench.folder() as base:
            run = bench.rehearse(bench.RELEASE, f"{base}/healthy", "--seed", str(seed))
            checks.that(run.code == 0, f"healthy, seed {seed}: exit {run.code}\n{run.stdout}")
            for defect in CAUGHT:
                run = bench.rehearse(bench.RELEASE, f"{base}/{defect}", "--seed", str(seed),
                                     "--defect", defect)
                check_defect(checks, run, defect)


def served(checks, times):
    with bench.folder() as base:
        for i in range(times):
            with bench.Served(seed=i + 1, realtime=True) as server:
                run = bench.run(server, bench.RELEASE, f"{base}/healthy-{i}", "--realtime")
                checks.that(run.code == 0, f"healthy, time {i + 1}: exit {run.code}\n{run.stdout}")
                checks.that(server.end()[0] == "rest", f"healthy, time {i + 1}: not at rest")
        for defect in CAUGHT:
            with bench.Served(defect=defect, realtime=True) as server:
                run = bench.run(server, bench.RELEASE, f"{base}/{defect}", "--realtime")
                check_defect(checks, run, defect)
                checks.that(server.end()[0] == "rest", f"{defect}: not at rest")


def main():
    checks = bench.Checks()
    count = int(sys.argv[2]) if len(sys.argv) > 2 else 0
    if len(sys.argv) > 1 and sys.argv[1] == "served":
        served(checks, count or 10)
    else:
        rehearsed(checks, count or 1)
    checks.exit()


if __name__ == "__main__":
    main()
