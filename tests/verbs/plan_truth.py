# SPDX-License-Identifier: Apache-2.0
"""Holds `plan` against rehearsals.

A first rehearsal samples finely and says what is true; `plan --known` then
foresees, and a second rehearsal shows, which limits are decided when the same
things are sampled at other intervals. What is called decidable must be decided,
what is called undecidable must come out inconclusive. Limits that a forecast
leaves open prove nothing, so their share is bounded.

Rise time and overshoot are varied only at intervals that resolve them: below
four samples in the passage `plan` claims a guaranteed interval only.

Timeline, reachable interval and duration are compared with the samples of a
rehearsal too, over TCP and over slow serial lines.
"""
import json
import pathlib
import sys
import tempfile

import numpy

import variations
from verbs import RELEASE, RIG, SMOKE, Claims, call


def rehearse(claims, folder, name, suite, rig=RIG):
    out = folder / name
    done = call("rehearse", "--quiet", "--rig", rig, "--out", out, suite)
    claims.that(done.returncode in (0, 1, 2), f"rehearsal {name} ends in order: {done.stderr}")
    return out


def verdicts(out):
    found = {}
    results = json.loads((out / "results.json").read_text())
    for suite in results["suites"]:
        for test in suite["tests"]:
            for check in test["checks"]:
                for metric in check["metrics"]:
                    if metric["verdict"]:
                        found[test["name"], check["name"], metric["name"]] = metric
    return found


def plan(claims, *words):
    done = call("plan", "--json", *words)
    claims.that(done.returncode in (0, 2), f"plan {words} is made: {done.stderr}")
    return done.returncode, json.loads(done.stdout)


def is_near(limit, metric):
    """Whether an end of the interval lies near to the limit, by a fifth of its width."""
    if metric["low"] is None or metric["high"] is None:
        return False
    width = metric["high"] - metric["low"]
    ends = [end for end in (limit["min"], limit["max"]) if end is not None]
    return any(abs(end - metric[side]) <= 0.2 * width for end in ends for side in ("low", "high"))


def decisions(claims, folder):
    for name, fine in (("fine", True), ("coarse", False)):
        (folder / f"{name}.yaml").write_text(variations.suite(fine))
    fine = rehearse(claims, folder, "fine", folder / "fine.yaml")
    coarse = rehearse(claims, folder, "coarse", folder / "coarse.yaml")
    code, foreseen = plan(claims, "--rig", RIG, "--known", fine / "results.json",
                          folder / "coarse.yaml")
    claims.that(code == 2, "plan ends with 2 where limits cannot be decided")
    seen = verdicts(coarse)
    right = {"decidable": 0, "undecidable": 0}
    wrong = {"decidable": 0, "undecidable": 0}
    left_open, metrics, tests = 0, set(), set()
    for test in foreseen["tests"]:
        for limit in test["limits"]:
            metric = seen[test["test"], limit["check"], limit["metric"]]
            answer = limit["answer"]
            decided = metric["verdict"] in ("pass", "fail")
            metrics.add(limit["metric"])
            tests.add(test["test"])
            claims.that(answer == "decidable" or limit["remedy"],
                        f"{test['test']} {limit['metric']}: {answer} comes with a remedy")
            if answer == "open":
                left_open += 1
            elif (answer == "decidable") == decided:
                right[answer] += 1
            else:
                wrong[answer] += 1
                what = (f"{test['test']} {limit['check']} {limit['metric']} of {limit['max']}: "
                        f"{answer}, but {metric['verdict']}: {metric['reason']}")
                print(what)
                claims.that(is_near(limit, metric), f"only near the border: {what}")
    total = sum(right.values()) + sum(wrong.values()) + left_open
    print(f"{total} limits of {len(metrics)} metrics in {len(tests)} tests: right {right}, "
          f"wrong {wrong}, left open {left_open}")
    for answer, count in right.items():
        claims.that(count >= 30, f"at least 30 limits are rightly {answer}: {count}")
        claims.that(wrong[answer] <= 0.05 * (count + wrong[answer]),
                    f"95 % of what is {answer} is right")
    claims.that(left_open <= 0.35 * total, f"few limits are left open: {left_open} of {total}")
    unknown_value(claims, folder, seen)


def unknown_value(claims, folder, seen):
    """Without an earlier run: what no value could pass must not pass."""
    _, foreseen = plan(claims, "--rig", RIG, folder / "coarse.yaml")
    count = 0
    for test in foreseen["tests"]:
        for limit in test["limits"]:
            verdict = seen[test["test"], limit["check"], limit["metric"]]["verdict"]
            if limit["answer"] == "undecidable":
                count += 1
                claims.that(verdict != "pass",
                            f"{test['test']} {limit['check']} {limit['metric']}: undecidable, "
                            f"but passed")
    claims.that(count >= 30, f"at least 30 are undecidable whatever the value: {count}")


def spacing(out, test):
    """Median time from row to row of each block of a test, in ns."""
    times = {}
    for path in sorted((out / "samples").glob("*.npy")):
        rows = numpy.load(path)
        if test in path.name and len(rows) > 20:
            times[path.name] = float(numpy.median(numpy.diff(rows["earliest"])))
    return times


def intervals(claims, folder):
    """The reachable interval, on links of several speeds."""
    text = RIG.read_text()
    tcp = 'bench_wire: {tcp: "127.0.0.1:15021", reply_timeout: 100 ms}'
    claims.that(tcp in text, "the rig has the line that this test replaces")
    for baud, every in ((19200, 2), (115200, 2), (115200, 10), (921600, 5)):
        rig = folder / f"serial-{baud}.yaml"
        rig.write_text(text.replace(
            tcp, f"bench_wire: {{rtu: /dev/ttyS0, baud: {baud}, reply_timeout: 400 ms}}"))
        suite = folder / f"serial-{baud}-{every}.yaml"
        suite.write_text("suite: serial\ntests:\n" +
                         variations.STEP.format(name="STP", every=every, hold=300, after=900) +
                         variations.step_check("steady_state_error: {min: -9 rpm, max: 9 rpm}"))
        _, foreseen = plan(claims, "--rig", rig, suite)
        out = rehearse(claims, folder, f"serial-out-{baud}-{every}", suite, rig)
        test = [t for t in foreseen["tests"] if t["test"] == "STP"][0]
        reach = {link["link"]: link["reach_ns"] for link in test["links"]}
        found = spacing(out, "STP")
        claims.that(len(found) >= 2, f"both links were sampled: {found}")
        for name, median in found.items():
            ok = any(abs(median - ns) <= 0.03 * ns for ns in reach.values())
            claims.that(ok, f"{baud} baud, every {every} ms: {name} was sampled every "
                            f"{median / 1e6:.3f} ms; foreseen {reach}")
        print(baud, every, {k: v / 1e6 for k, v in reach.items()},
              sorted(v / 1e6 for v in found.values()))


def shipped(claims, folder):
    for suite in (SMOKE, RELEASE):
        code, foreseen = plan(claims, "--rig", RIG, suite)
        claims.that(code == 0, f"every limit of {suite.name} is decidable")
        if suite == RELEASE:
            continue
        out = rehearse(claims, folder, suite.stem, suite)
        for key, metric in verdicts(out).items():
            claims.that(metric["verdict"] in ("pass", "fail"), f"{key} is decided")
        duration = json.loads((out / "results.json").read_text())["facts"]["duration_ns"]
        claims.that(0.8 * duration <= foreseen["whole_ns"] <= 1.05 * duration,
                    f"{suite.name} takes {duration / 1e9:.1f} s, planned were "
                    f"{foreseen['whole_ns'] / 1e9:.1f} s")
        claims.that(duration <= foreseen["whole_most_ns"], f"{suite.name} ends before the most")


def main():
    claims = Claims()
    with tempfile.TemporaryDirectory() as name:
        folder = pathlib.Path(name)
        for part in sys.argv[1:] or ["decisions", "intervals", "shipped"]:
            globals()[part](claims, folder)
    claims.end()


if __name__ == "__main__":
    main()
