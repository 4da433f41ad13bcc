# SPDX-License-Identifier: Apache-2.0
"""An ordinary run: every output says the same, in the form that its readers expect."""
import copy
import json
import re
import subprocess
import sys
import xml.etree.ElementTree as tree

from junitparser import JUnitXml

from outputs import Run, check, junit_faults, parse_junit, xmllint

XHTML = "{http://www.w3.org/1999/xhtml}"
SVG = "{http://www.w3.org/2000/svg}"


def junit(run):
    xmllint(run.file("junit.xml"))
    root = parse_junit(run.read("junit.xml"))
    check(junit_faults(root) == [], "junit rules: %s" % junit_faults(root))
    # The rules themselves must be able to fail.
    spoilt = []
    for path, key, value in ((".", "tests", "9"), ("testsuite", "time", "1e-05"),
                             ("testsuite", "time", "nan"), ("testsuite", "file", "x"),
                             ("testsuite", "timestamp", "2026-12-01T09:38:17Z"),
                             ("testsuite", "failures", "7"), ("testsuite/testcase", "line", "3"),
                             ("testsuite/testcase", "time", "1,234.5")):
        other = copy.deepcopy(root)
        other.find(path).set(key, value) if path != "." else other.set(key, value)
        spoilt.append(junit_faults(other) != [])
    check(all(spoilt), "the rules let a bad file pass: %s" % spoilt)
    suite = JUnitXml.fromfile(run.file("junit.xml"))
    counts = [(one.tests, one.failures, one.errors, one.skipped) for one in suite]
    check(counts == [(6, 1, 3, 1)], "junitparser counts %s" % counts)
    kinds = {}
    for case in root.iter("testcase"):
        kinds[case.get("name")] = [(o.tag, o.get("type")) for o in case]
    check(kinds == {"SPD-01 x": [], "SPD-02 x": [("failure", "limit")],
                    "SPD-03 x": [("error", "inconclusive")],
                    "SPD-04 x": [("error", "await-expired")],
                    "SPD-05 x": [("error", "not-reached")], "SPD-06 x": [("skipped", None)]},
          "outcomes %s" % kinds)
    failure = root.find(".//failure")
    check("overshoot 20.00 % (19.60 to 20.40), limit at most 12 %" in failure.text,
          "the failure has no numbers: %s" % failure.text)
    verified = subprocess.run([sys.executable, "-m", "junitparser", "verify", run.file("junit.xml")],
                              stdout=subprocess.DEVNULL)
    check(verified.returncode == 1, "junitparser verify returned %d" % verified.returncode)


def no_constant(name):
    raise ValueError(name + " is not JSON")


def results(run):
    data = json.loads(run.read("results.json"), parse_constant=no_constant)
    check(data["format"] == 1 and data["verdict"] == "fail" and data["exit_code"] == 1, "head")
    check(data["totals"] == {"tests": 6, "pass": 1, "fail": 1, "inconclusive": 1, "error": 2,
                             "skipped": 1}, "totals %s" % data["totals"])
    check(data["partial"] and data["selection"] == {"selected": 5, "of": 6}, "selection")
    check(data["facts"]["seed"] == "18446744073709551557", "the seed lost digits")
    check(data["facts"]["rest"]["confirmed"] is True, "rest")
    suite = data["suites"][0]
    check(suite["values"] == [{"name": "half_speed", "value": "1200 rpm", "overridden": True}],
          "overrides")
    metrics = suite["tests"][1]["checks"][0]["metrics"]
    wanted = {"name", "value", "low", "high", "uncertainty", "unit", "min", "max", "evidence",
              "verdict", "reason"}
    check(all(wanted <= set(metric) for metric in metrics), "members of a metric")
    overshoot = metrics[2]
    check((overshoot["value"], overshoot["low"], overshoot["high"]) == (20, 19.6, 20.4)
          and overshoot["min"] is None and overshoot["max"] == 12
          and overshoot["verdict"] == "fail" and overshoot["evidence"] == "self-reported",
          "the failed metric: %s" % overshoot)
    unknown = metrics[3]
    check(unknown["value"] is None and unknown["low"] is None and unknown["high"] is None
          and unknown["uncertainty"] is None and unknown["verdict"] is None,
          "NaN and infinity are not null: %s" % unknown)
    check(suite["tests"][4]["begin_ns"] is None, "a test that was not reached has a begin")


def text_of(element):
    return " ".join("".join(element.itertext()).split())


def html(run):
    xmllint(run.file("report.html"))
    data = run.read("report.html")
    check(data.startswith(b"<!DOCTYPE html>\n"), "doctype")
    check(len(data) < 300000, "six tests make %d bytes" % len(data))
    for bad in (b"<script", b"style=", b"<style", b"data:", b"javascript:", b" onload", b"<object",
                b"target="):
        check(bad not in data.lower(), "the page has %s" % bad)
    # Elements that HTML does not keep empty must not be closed as if they were.
    for name in re.findall(rb"<([a-z0-9]+)[^<>]*/>", data):
        check(name in (b"meta", b"link", b"line", b"rect", b"polyline", b"circle", b"path",
                       b"wbr"),
              "<%s/> is no empty element of HTML" % name.decode())
    root = tree.fromstring(data)
    body = root.find(XHTML + "body")
    header = text_of(body.find(XHTML + "header"))
    for part in ("Verdict: fail", "6 tests: 1 pass, 1 fail, 1 inconclusive, 2 error, 1 skipped",
                 "Partial: 5 of 6", "overridden", "rehearsal", "came to rest"):
        check(part in header, "'%s' is not at the top: %s" % (part, header))
    heads = [text_of(h) for h in root.iter(XHTML + "h2")]
    check(heads == ["What was run", "Cautions", "What to know before the good news",
                    "What did not pass", "All tests", "Requirements", "Each test", "Sign-off"],
          "order: %s" % heads)
    page = text_of(body)
    for part in ("half_speed = 1200 rpm", "SRS-112", "set speed_command", "await", "self-reported",
                 "refused with exception 3", "slow_speed_loop", "2025-12-28 (out of date)",
                 "out of calibration", "2 samples that were due were not taken"):
        check(part in page, "'%s' is not in the page" % part)
    ids = [e.get("id") for e in root.iter() if e.get("id")]
    check(len(ids) == len(set(ids)), "two elements of one id")
    for a in root.iter(XHTML + "a"):
        check(a.get("href", "")[1:] in ids, "a link to nowhere: %s" % a.get("href"))
    pictures = list(root.iter(SVG + "svg"))
    check(len(pictures) == 3, "%d pictures" % len(pictures))
    for picture in pictures:
        words = text_of(picture)
        for part in ("commanded", "speed, rpm (self-reported)", "final_value at most",
                     "settling_time at most", "time since the stimulus began, ms"):
            check(part in words, "'%s' is not in the picture: %s" % (part, words))
        check(picture.get("aria-labelledby") in ids, "a picture without a name")
        lines = [e.get("stroke") for e in picture.iter(SVG + "polyline")]
        check("#1f4e6b" in lines and "#b3681d" in lines, "curves: %s" % lines)
        # The missing value breaks the curve in two.
        check(lines.count("#1f4e6b") == 2, "the curve is joined over a missing value")
    css = run.read("report.css")
    check(b"@import" not in css and b"url(" not in css, "the stylesheet loads something")


def sums(run):
    done = subprocess.run(["sha256sum", "--check", "--strict", "--quiet", "SHA256SUMS"],
                          cwd=run.path)
    check(done.returncode == 0, "sha256sum does not agree")
    named = {line.split("  ", 1)[1] for line in run.read("SHA256SUMS").decode().splitlines()}
    check({"junit.xml", "report.html", "report.css", "results.json", "journal.jsonl", "rig.yaml",
           "samples/SPD-01_x.0.npy", "samples/SPD-01_x.0.csv"} <= named, "named: %s" % named)


with Run(" x") as one:
    junit(one)
    results(one)
    html(one)
    sums(one)
    with Run(" x") as other:
        check(one.read("SHA256SUMS") == other.read("SHA256SUMS"), "the same run, other bytes")
print("ok")
