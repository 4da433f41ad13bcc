# SPDX-License-Identifier: Apache-2.0
"""Texts that break writers: each survives, readable, in every output, or becomes visible."""
import json
import os
import xml.etree.ElementTree as tree

from junitparser import JUnitXml

from outputs import Run, check, junit_faults, parse_junit, xmllint

ESCAPE = "\\x1b"
ROWS = [
    # (what is written, what must be read)
    ("<b>&amp;\"quoted\" 'single' ]]> <!-- -->", "<b>&amp;\"quoted\" 'single' ]]> <!-- -->"),
    ("</script><script>alert(1)</script>", "</script><script>alert(1)</script>"),
    ("Drehzahl \u00fcber 3000 \u00b0/s, \u65e5\u672c\u8a9e, \U0001f6d1",
     "Drehzahl \u00fcber 3000 \u00b0/s, \u65e5\u672c\u8a9e, \U0001f6d1"),
    ("a\x01b\x08c\x0cd\x1b[31me\x7ff", "a\\x01b\\x08c\\x0cd" + ESCAPE + "[31me\\x7ff"),
    ("carriage\rreturn", "carriage\\x0dreturn"),
    (b"bad \xff\xc3( \xed\xa0\x80 \xf8 utf-8", "bad \ufffd\ufffd( \ufffd\ufffd\ufffd \ufffd utf-8"),
    ("left \u202e thgir \u2066 x", "left \\u202e thgir \\u2066 x"),
    ("noncharacter \uffff \ufffe", "noncharacter \\uffff \\ufffe"),
    ("long " + "x" * 9990 + " end", "x" * 700),
    ("%s%n%d {} ${x} $(x) `x`", "%s%n%d {} ${x} $(x) `x`"),
]


def has(data, wanted, where):
    check(wanted in data, "%r is not in %s" % (wanted[:60], where))


def check_run(run, wanted, long_text):
    xmllint(run.file("junit.xml"))
    junit = parse_junit(run.read("junit.xml"))
    check(junit_faults(junit) == [], "junit: %s" % junit_faults(junit))
    has("".join(junit.itertext()), wanted, "junit.xml")
    has(junit.find(".//failure").get("message"), wanted, "the failure's message")
    check(sum(suite.tests for suite in JUnitXml.fromfile(run.file("junit.xml"))) == 6, "tests")
    names = [case.get("name") for case in junit.iter("testcase")]
    check(names[0].startswith("SPD-01") and len(set(names)) == 6, "names %s" % names)

    results = json.loads(run.read("results.json"))
    suite = results["suites"][0]
    has(suite["tests"][1]["reason"], wanted, "results.json")
    has(suite["tests"][1]["title"], long_text or wanted, "results.json")
    has(results["facts"]["identities"][0]["text"], wanted, "identities")

    xmllint(run.file("report.html"))
    page = tree.fromstring(run.read("report.html"))
    has("".join(page.itertext()), long_text or wanted, "report.html")
    check(not list(page.iter("{http://www.w3.org/1999/xhtml}script")), "a script came in")

    for line in run.read("journal.jsonl").decode("utf-8").splitlines():
        json.loads(line)
    for folder, _, files in os.walk(run.path):
        for name in files:
            check(name.isascii() and all(c.isalnum() or c in "._-" for c in name), name)


for text, wanted in ROWS:
    with Run(text) as one:
        check_run(one, wanted, wanted and ("x" * 9990 + " end" if "x" * 9990 in str(text) else ""))
print("ok")
