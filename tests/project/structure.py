# SPDX-License-Identifier: Apache-2.0
"""The arrows between the folders, read from the includes; and what may not be used at all.

A header is found by its bare name, so a name may exist once only. An include
of a header of a folder that the including one may not see is a failure, and so
is a call that the house has banned.
"""
import pathlib
import re
import sys

TOP = pathlib.Path(__file__).resolve().parents[2]
# folder: folders whose headers it may include, beside its own
MAY_SEE = {
    "checks/base": set(),
    "checks": {"checks/base"},
    "rigs/model": {"checks/base"},
    "rigs/yaml": {"checks/base"},
    "rigs/links": {"checks/base"},
    "rigs": {"checks", "checks/base", "rigs/links", "rigs/yaml", "rigs/model"},
}
MAY_SEE["suites"] = MAY_SEE["rigs"] | {"rigs"}
MAY_SEE["reports"] = MAY_SEE["suites"] | {"suites"}
MAY_SEE["runner"] = MAY_SEE["reports"] | {"reports"}
# checks/ is pure: no clock, file, thread, Modbus or YAML.
PURE = {"checks"}
IMPURE_HEADERS = {"time.h", "unistd.h", "pthread.h", "fcntl.h", "signal.h", "modbus.h", "yaml.h",
                  "sys/time.h", "sys/stat.h", "poll.h"}
IMPURE_CALLS = re.compile(r"\b(fopen|printf|fprintf|puts|fputs|time|clock_gettime|rand|srand)\s*\(")
BANNED = re.compile(r"\b(strcpy|strcat|sprintf|vsprintf|gets|strtok|asctime|ctime|gmtime|localtime|"
                    r"alloca|system|popen|setlocale|tmpnam|mktemp)\s*\(")
COMMENT = re.compile(r"/\*.*?\*/|//[^\n]*", re.S)
TEXT = re.compile(r'"(?:[^"\\\n]|\\.)*"')


def main():
    failures, owners, read = [], {}, 0
    for folder in MAY_SEE:
        for header in (TOP / folder).glob("*.h"):
            if header.name in owners:
                failures.append(f"{folder}/{header.name}: also in {owners[header.name]}")
            owners[header.name] = folder
    for folder, visible in MAY_SEE.items():
        for source in sorted((TOP / folder).glob("*.[ch]")):
            read += 1
            name = f"{folder}/{source.name}"
            text = source.read_text()
            for include in re.findall(r'^\s*#\s*include\s+"([^"]+)"', text, re.M):
                owner = owners.get(include)
                if owner and owner != folder and owner not in visible:
                    failures.append(f"{name}: may not see {owner}/{include}")
            if not text.startswith("/* SPDX-License-Identifier: Apache-2.0 */"):
                failures.append(f"{name}: no licence line")
            code = TEXT.sub('""', COMMENT.sub("", text))
            for call in BANNED.findall(code):
                failures.append(f"{name}: {call}() is banned")
            if folder in PURE:
                for include in re.findall(r"#\s*include\s+<([^>]+)>", text):
                    if include in IMPURE_HEADERS:
                        failures.append(f"{name}: <{include}> in a pure folder")
                for call in IMPURE_CALLS.findall(code):
                    failures.append(f"{name}: {call}() in a pure folder")
    for failure in failures:
        print(f"FAILED: {failure}", file=sys.stderr)
    print(f"{read} files read, {len(failures)} failures")
    sys.exit(1 if failures or read < 50 else 0)


if __name__ == "__main__":
    main()
