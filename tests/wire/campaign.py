# SPDX-License-Identifier: Apache-2.0
"""Runs over a wire that goes wrong at random moments; what must hold all the same.

    campaign.py [RUNS] [SEED] [JOBS]     default 60 runs, seed 1, 2 at a time
    campaign.py short                    the ordinary test: a few runs

Each run is against a served bench behind proxy.py, with its own seed, rate of
faults, wire (TCP, a serial line, or one of each) and controller (healthy, or
wrong in a named way): of suites/smoke.yaml unattended, or of suite.yaml of this
folder on an attended rig without the proofs of the bench, which one lost reply
already stops. What is asserted of each:

- it ends within what its timeouts allow, with an exit code that it may have;
- a test that fails or is an error without faults on the wire is no "pass";
- metrics of tests that pass on the healthy controller agree, within their
  intervals, with those without faults;
- the model says that its shaft is at rest when the run has ended; where the
  wire was taken away for good the exit code is 4 or 3, and the watchdogs have
  stopped the shaft;
- the run folder is whole: every file as sealed.

KEEP_RUNS=FOLDER in the environment keeps the folders of runs to look at.

A "fail" on the healthy controller is counted and shown, not asserted: a link
that is silent for longer than a watchdog's time does stop the drive.
"""
import math
import multiprocessing
import os
import pathlib
import pty
import random
import re
import shutil
import signal
import subprocess
import sys
import threading
import time

sys.path.insert(0, str(pathlib.Path(__file__).resolve().parents[1] / "bench"))
import bench  # noqa: E402
from proxy import RTU_KINDS, TCP_KINDS, Dice, RtuProxy, TcpProxy  # noqa: E402

LINKS = ("drive_wire", "bench_wire")
# reply_timeout of the rig, s
TIMEOUTS = {True: 0.1, False: 0.03}
SUITES = {True: bench.SMOKE, False: pathlib.Path(__file__).resolve().parent / "suite.yaml"}
RATES = (0.003, 0.01, 0.02, 0.04, 0.08, 0.12)
# What the smoke suite catches by a test that fails, and what it stops at.
DEFECTS = ("overshoot", "sluggish", "encoder-offset", "magnetising-current", "direction-swapped",
           "wrong-fault-code", "torque-off-slow", "encoder-loss-missed", "fault-late",
           "stale-image", "watchdog-missing", "watchdog-late", "frozen-image")
# Pass, fail, undecided, aborted, not at rest, bench not there: all that a run may end with.
LEGAL = {0, 1, 2, 3, 4, 69}
REST_WITHIN = 30.0  # s, default of a rig
NOMINAL = 12.0      # s, the smoke suite with some reserve


def rig_of(plan, base):
    """The rig file with these kinds of wire, with or without the proofs of the bench."""
    timeout = f"{TIMEOUTS[plan.proofs] * 1000:.0f} ms"
    text = bench.RIG.read_text()
    for number, (link, wire) in enumerate(zip(LINKS, plan.wires)):
        place = f'tcp: "127.0.0.1:1502{number}"'
        if wire == "rtu":
            place = f"rtu: /dev/ttyS{number}, baud: 115200"
        text, count = re.subn(rf"{link}: \{{tcp.*\}}", f"{link}: {{{place}, reply_timeout: {timeout}}}",
                              text)
        assert count == 1
    if not plan.proofs:
        text = re.sub(r"^    watchdog:\n(      .*\n)+", "", text, flags=re.M)
        text = re.sub(r"^direction:\n(  .*\n)+", "", text, flags=re.M)
        text = text.replace("attendance: unattended", "attendance: attended\nrest_within: 6 s")
        assert "direction:" not in text and "tripped" not in text
    path = pathlib.Path(base) / f"{'-'.join(plan.wires)}-{plan.proofs}.yaml"
    path.write_text(text)
    return path


class Truth:
    """What a controller is without faults on the wire: rehearsed with some seeds."""

    def __init__(self, plan, base, seeds=4):
        self.verdicts, self.metrics = {}, {}
        rig, defect = rig_of(plan, base), plan.defect
        for seed in range(1, seeds + 1):
            options = ["--seed", str(seed)] + (["--defect", defect] if defect else [])
            run = bench.rehearse(SUITES[plan.proofs], f"{base}/truth-{rig.stem}-{defect}-{seed}", *options,
                                 rig=rig)
            for test in tests_of(run):
                self.verdicts.setdefault(test["name"], set()).add(test["verdict"])
                for key, metric in metrics_of(test):
                    low, high = self.metrics.get(key, (math.inf, -math.inf))
                    self.metrics[key] = (min(low, metric["low"]), max(high, metric["high"]))

    def may_pass(self, test):
        return not self.verdicts[test] <= {"fail", "error"}


def tests_of(run):
    return [test for suite in run.results()["suites"] for test in suite["tests"]]


def metrics_of(test):
    for number, check in enumerate(test.get("checks", [])):
        for metric in check["metrics"]:
            if metric["low"] is not None and metric["high"] is not None:
                yield (test["name"], number, metric["name"]), metric


class Plan:
    """One run of the campaign, decided by its seed alone."""

    def __init__(self, seed, wires=None, defect=False, rate=None, cut=None, proofs=None):
        dice = random.Random(seed)
        self.seed = seed
        self.proofs = dice.random() < 0.3 if proofs is None else proofs
        self.wires = wires or dice.choice([("tcp", "tcp")] * 4 + [("rtu", "rtu")] * 2 +
                                          [("tcp", "rtu"), ("rtu", "tcp")])
        chosen = dice.choice(DEFECTS) if dice.random() < 0.6 else None
        self.defect = chosen if defect is False else defect
        self.rate = dice.choice(RATES) if rate is None else rate
        cut_at = (dice.uniform(0.2, 9), dice.choice(["silent", "refused"]),
                  dice.choice([LINKS, LINKS[:1], LINKS[1:]]))
        self.cut = cut_at if (dice.random() < 0.12 if cut is None else cut) else None

    def __str__(self):
        cut = ""
        if self.cut:
            cut = f", cut at {self.cut[0]:.1f} s ({self.cut[1]}, {'+'.join(self.cut[2])})"
        return (f"seed {self.seed}: {'+'.join(self.wires)}, {'unattended' if self.proofs else 'attended'}, "
                f"{self.defect or 'healthy'}, rate {self.rate}{cut}")


def serve(plan, rig):
    command = [bench.program(), "serve", "--rig", str(rig), "--seed", str(plan.seed % 1000 + 1)]
    for link, wire in zip(LINKS, plan.wires):
        command += ["--listen", f"{link}={'rtu' if wire == 'rtu' else 'tcp:127.0.0.1:0'}"]
    if plan.defect:
        command += ["--defect", plan.defect]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    line = process.stdout.readline()
    if not line.startswith("ready "):
        raise RuntimeError(f"the served bench did not start: {line!r}")
    return process, dict(word.split("=", 1) for word in line.split()[1:])


def ask(server):
    server.send_signal(signal.SIGUSR1)
    return bench.parse_state(server.stdout.readline())


def until_rest(server, seconds):
    end = time.monotonic() + seconds
    state = ask(server)
    while state[0] != "rest" and time.monotonic() < end:
        time.sleep(0.02)
        state = ask(server)
    return state


class Outcome:
    """What came out of a run; travels between processes."""

    def __init__(self, plan):
        self.plan, self.failures, self.notes = plan, [], []
        self.counts, self.verdicts = {}, {}
        self.code, self.seconds, self.bound, self.transactions, self.agreed = None, 0.0, 0.0, 0, 0

    def that(self, condition, text):
        if not condition:
            self.failures.append(text)
        return condition


def judge(outcome, run, truth):
    plan = outcome.plan
    for test in tests_of(run):
        verdict, name = test["verdict"], test["name"]
        outcome.verdicts[verdict] = outcome.verdicts.get(verdict, 0) + 1
        if not truth.may_pass(name):
            outcome.that(verdict != "pass",
                         f"{name} passes; without faults it is {truth.verdicts[name]}")
        elif truth.verdicts[name] == {"pass"} and verdict == "fail":
            outcome.notes.append(f"{name} fails: {test['reason'][:300]}")
        if plan.defect or verdict != "pass":
            continue
        for key, metric in metrics_of(test):
            if metric.get("verdict") != "pass" or key not in truth.metrics:
                continue
            low, high = truth.metrics[key]
            outcome.agreed += 1
            outcome.that(metric["low"] <= high and metric["high"] >= low,
                         f"{key}: {metric['low']:.6g} to {metric['high']:.6g} {metric['unit']}, "
                         f"without faults {low:.6g} to {high:.6g}")


class Process:
    """The run. Its input and its errors are a terminal, on which an attended rig asks."""

    def __init__(self, command):
        self.master, slave = pty.openpty()
        os.write(self.master, b"yes\n")
        self.process = subprocess.Popen(command, stdin=slave, stdout=subprocess.PIPE, stderr=slave)
        os.close(slave)
        self.err = b""
        self.reader = threading.Thread(target=self.read, daemon=True)
        self.reader.start()

    def read(self):
        try:
            while data := os.read(self.master, 4096):
                self.err += data
        except OSError:
            pass  # the terminal has ended

    def wait(self, seconds):
        """Exit code (None: it hung), output, errors."""
        code = None
        try:
            out = self.process.communicate(timeout=seconds)[0]
            code = self.process.returncode
        except subprocess.TimeoutExpired:
            self.process.kill()
            out = self.process.communicate()[0]
        self.reader.join(5)
        os.close(self.master)
        return code, out.decode(errors="replace"), self.err.decode(errors="replace")


def carry_out(plan, truth, base):
    outcome, rig = Outcome(plan), rig_of(plan, base)
    folder = pathlib.Path(base) / f"run-{plan.seed}"
    server, addresses = serve(plan, rig)
    proxies, timers = {}, []
    try:
        command = [bench.program(), "run", "--rig", str(rig), "--quiet", "--out", str(folder)]
        for number, (link, wire) in enumerate(zip(LINKS, plan.wires)):
            kind, kinds = (RtuProxy, RTU_KINDS) if wire == "rtu" else (TcpProxy, TCP_KINDS)
            proxies[link] = kind(addresses[link], Dice(plan.seed * 2 + number, plan.rate, kinds),
                                 TIMEOUTS[plan.proofs])
            command += ["--link", f"{link}={proxies[link].address}"]
        started = time.monotonic()
        process = Process([*command, str(SUITES[plan.proofs])])
        if plan.cut:
            moment, how, links = plan.cut
            timers = [threading.Timer(moment, proxies[link].cut_now, (how,)) for link in links]
            for timer in timers:
                timer.start()
        code, out, err = process.wait(240)
        outcome.seconds, outcome.code = time.monotonic() - started, code
        outcome.that(code is not None, "it hangs")
        for timer in timers:
            timer.cancel()
        state = until_rest(server, 10) if code == 4 else ask(server)
        outcome.that(state[0] == "rest", f"exit {code}; the model says {state}")
    finally:
        for proxy in proxies.values():
            proxy.stop()
        server.terminate()
        late = server.communicate(timeout=20)[1]
    if late:
        outcome.notes.append("the bench was late (busy machine)")
    finish(outcome, proxies, bench.Run(code, out, err, folder), truth)
    return outcome


def finish(outcome, proxies, run, truth):
    plan, code = outcome.plan, outcome.code
    was_cut = bool(plan.cut) and outcome.seconds > plan.cut[0]
    for proxy in proxies.values():
        outcome.transactions += proxy.dice.transactions
        for kind, count in proxy.dice.counts.items():
            outcome.counts[kind] = outcome.counts.get(kind, 0) + count
    faults = sum(outcome.counts.values())
    # Each fault costs at most a dribbled reply, a quiet time and a new connection.
    outcome.bound = NOMINAL + faults * 5 * TIMEOUTS[plan.proofs] + 2 * REST_WITHIN
    outcome.that(outcome.seconds < outcome.bound,
                 f"took {outcome.seconds:.1f} s, {outcome.bound:.1f} s at most")
    outcome.that(code in LEGAL, f"exit {code}\n{run.stdout[-800:]}{run.stderr[-800:]}")
    if code == 4:
        outcome.that(was_cut, f"not at rest, though the wire is there\n{run.stderr[-400:]}")
        last = run.stderr.strip().splitlines()[-1:] or [""]
        outcome.that(last[0].startswith("NOT AT REST"), f"last line is {last}")
    elif was_cut and "bench_wire" in plan.cut[2]:
        outcome.that(code in (3, 69), f"exit {code} after the bench's wire was cut")
    if (run.folder / "results.json").exists():
        judge(outcome, run, truth)
        sums = subprocess.run(["sha256sum", "-c", "--quiet", "SHA256SUMS"], cwd=run.folder,
                              capture_output=True, text=True)
        outcome.that(sums.returncode == 0, f"the run folder: {sums.stdout}{sums.stderr}")
    else:
        outcome.notes.append(f"no results: {run.stderr[-300:]}")
        outcome.that(code in (69, 70), f"exit {code} without results\n{run.stderr[-400:]}")


def one(work):
    plan, truth = work
    with bench.folder() as base:
        try:
            outcome = carry_out(plan, truth, base)
            if os.environ.get("KEEP_RUNS"):
                shutil.copytree(base, f"{os.environ['KEEP_RUNS']}/{plan.seed}", dirs_exist_ok=True)
            return outcome
        except Exception as error:  # pylint: disable=broad-except
            outcome = Outcome(plan)
            outcome.that(False, f"the campaign itself: {type(error).__name__}: {error}")
            return outcome


def one_truth(plan):
    with bench.folder() as base:
        return Truth(plan, base)


def truths(plans, pool):
    """One for each wire and controller that the plans have."""
    first = {(plan.wires, plan.defect, plan.proofs): plan for plan in plans}
    found = dict(zip(first, pool.map(one_truth, first.values(), chunksize=1)))
    return [(plan, found[plan.wires, plan.defect, plan.proofs]) for plan in plans]


def show(outcomes):
    counts, codes, verdicts = {}, {}, {}
    for outcome in outcomes:
        codes[outcome.code] = codes.get(outcome.code, 0) + 1
        for total, part in ((counts, outcome.counts), (verdicts, outcome.verdicts)):
            for key, count in part.items():
                total[key] = total.get(key, 0) + count
    print("faults by kind: " + ", ".join(f"{kind} {counts[kind]}" for kind in sorted(counts)))
    print(f"{len(outcomes)} runs, {sum(o.transactions for o in outcomes)} transactions, "
          f"{sum(counts.values())} faults; exit codes {dict(sorted(codes.items(), key=str))}; "
          f"verdicts {verdicts}; {sum(o.agreed for o in outcomes)} metrics compared; longest run "
          f"{max(o.seconds for o in outcomes):.1f} s")


def short_plans():
    plans = [Plan(1, ("tcp", "tcp"), None, 0.006, False, False),
             Plan(2, ("rtu", "rtu"), "encoder-loss-missed", 0.01, False, False),
             Plan(3, ("tcp", "rtu"), "encoder-offset", 0.006, False, False),
             Plan(4, ("tcp", "tcp"), "overshoot", 0.03, False, True),
             Plan(5, ("tcp", "tcp"), None, 0.003, True, False)]
    plans[-1].cut = (2.0, "silent", LINKS)
    return plans


def main():
    words = sys.argv[1:]
    if words[:1] == ["short"]:
        plans, jobs = short_plans(), 2
    else:
        runs, seed, jobs = ([int(word) for word in words] + [60, 1, 2][len(words):])[:3]
        plans = [Plan(seed * 100000 + i) for i in range(runs)]
    outcomes, failed = [], 0
    with multiprocessing.Pool(jobs) as pool:
        for outcome in pool.imap_unordered(one, truths(plans, pool)):
            outcomes.append(outcome)
            failed += bool(outcome.failures)
            print(f"{outcome.plan}: exit {outcome.code}, {outcome.seconds:.1f} s, "
                  f"{sum(outcome.counts.values())} faults, {outcome.verdicts}", flush=True)
            for text in outcome.notes:
                print(f"    note: {text}", flush=True)
            for text in outcome.failures:
                print(f"    FAILED: {text}", flush=True)
    show(outcomes)
    print(f"{len(outcomes) - failed} passed, {failed} failed")
    sys.exit(1 if failed or not outcomes or not sum(sum(o.counts.values()) for o in outcomes)
             else 0)


if __name__ == "__main__":
    main()
