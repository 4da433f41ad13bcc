# SPDX-License-Identifier: Apache-2.0
"""What the tests of this folder share: sample runs, and the rules of JUnit XML."""
import os
import re
import shutil
import subprocess
import tempfile
import xml.etree.ElementTree as tree


class Run:
    """A run folder made by write_sample_run, removed at the end."""

    def __init__(self, text):
        self.top = tempfile.mkdtemp(prefix="drivetrial-test-")
        self.path = os.path.join(self.top, "run")
        subprocess.run([os.environ["WRITE_SAMPLE_RUN"], self.path, text], check=True)

    def __enter__(self):
        return self

    def __exit__(self, *_):
        shutil.rmtree(self.top)

    def file(self, name):
        return os.path.join(self.path, name)

    def read(self, name):
        with open(self.file(name), "rb") as file:
            return file.read()


def check(condition, what):
    if not condition:
        raise SystemExit("FAILED: " + what)


# The rules on which both schemas in use agree: Apache Ant's (windyroad/JUnit-Schema, JUnit.xsd)
# and Jenkins' junit-10.xsd; their text is not copied here.
TESTSUITE = {"name", "package", "id", "tests", "failures", "errors", "skipped", "time",
             "timestamp", "hostname"}
NUMBER = re.compile(r"\d+\Z")
TIME = re.compile(r"\d+\.\d{3}\Z")
STAMP = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d\Z")


def junit_faults(root):
    """Everything in a JUnit file that one of the two schemas refuses."""
    faults = []

    def rule(holds, what):
        if not holds:
            faults.append(what)

    rule(root.tag == "testsuites" and not root.attrib, "testsuites has attributes")
    for index, suite in enumerate(root):
        rule(suite.tag == "testsuite", "a child of testsuites is no testsuite")
        rule(set(suite.attrib) == TESTSUITE, "attributes of testsuite: %s" % sorted(suite.attrib))
        for key in ("id", "tests", "failures", "errors", "skipped"):
            rule(NUMBER.match(suite.get(key, "")), "%s is no count" % key)
        rule(suite.get("id") == str(index), "id is not the index")
        rule(TIME.match(suite.get("time", "")), "time %r" % suite.get("time"))
        rule(STAMP.match(suite.get("timestamp", "")), "timestamp %r" % suite.get("timestamp"))
        rule(suite.get("hostname"), "hostname is empty")
        tags = [child.tag for child in suite]
        cases = suite.findall("testcase")
        rule(tags == ["properties"] + ["testcase"] * len(cases) + ["system-out", "system-err"],
             "order of children: %s" % tags)
        for one in suite.find("properties") if suite.find("properties") is not None else []:
            rule(one.tag == "property" and set(one.attrib) == {"name", "value"} and one.get("name"),
                 "a property without name and value")
        names = set()
        for case in cases:
            rule(set(case.attrib) == {"name", "classname", "time"},
                 "attributes of testcase: %s" % sorted(case.attrib))
            rule(TIME.match(case.get("time", "")), "time %r" % case.get("time"))
            rule(not re.search(r"[\n\t\r]", case.get("name", "")), "a name of several lines")
            names.add((case.get("classname"), case.get("name")))
            rule(len(case) <= 1, "more than one outcome")
            for outcome in case:
                if outcome.tag == "skipped":
                    rule(not outcome.attrib and not outcome.text, "skipped says something")
                else:
                    rule(outcome.tag in ("failure", "error"), "outcome %s" % outcome.tag)
                    rule(set(outcome.attrib) == {"message", "type"} and outcome.get("type"),
                         "attributes of %s: %s" % (outcome.tag, sorted(outcome.attrib)))
        rule(len(names) == len(cases), "two test cases of one name")
        for key, tag in (("failures", "failure"), ("errors", "error"), ("skipped", "skipped")):
            rule(suite.get(key) == str(len(suite.findall("testcase/" + tag))), "%s" % key)
        rule(suite.get("tests") == str(len(cases)), "tests")
    return faults


def parse_junit(data):
    return tree.fromstring(data)


def xmllint(path):
    subprocess.run(["xmllint", "--noout", "--nonet", path], check=True)
